/*
 * coding/stretches.h - a segment cut where its statistics change, a code for each stretch
 *
 * Room: coding. Pure. Layout and meaning: format-spec/segment.md, "Stretches". Bytes are coded each for itself; where
 * to cut is found by coding/split.c.
 *
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_CODING_STRETCHES_H
#define FIRN_CODING_STRETCHES_H

#include "coding/split.h"
#include "coding/streams.h"
#include "coding/table.h"

#include "firn/segment.h"

struct firn_stretches_write_work {
    struct firn_split_work split;
    uint8_t lengths[FIRN_TABLE_SYMBOLS];
    uint16_t words[FIRN_TABLE_SYMBOLS];
    uint32_t counts[FIRN_TABLE_SYMBOLS];
};

struct firn_stretches_read_work {
    uint16_t entries[FIRN_STREAMS_ENTRIES];
    uint8_t lengths[FIRN_TABLE_SYMBOLS];
    uint32_t counts[FIRN_TABLE_SYMBOLS];
};

/*
 * What follows the first two bytes of a segment. Returns the bytes written, at most room_bytes; 0 when they do not fit.
 */
size_t firn_stretches_write(const uint8_t *raw, size_t raw_bytes, size_t cell_bytes, uint8_t *room, size_t room_bytes,
                            struct firn_stretches_write_work *work);

/* FIRN_OK or FIRN_BAD_DATA. */
enum firn_status firn_stretches_read(const uint8_t *coded, size_t coded_bytes, uint8_t *raw, size_t raw_bytes,
                                     struct firn_stretches_read_work *work);

/* As firn_segment_examine. */
enum firn_status firn_stretches_examine(const uint8_t *coded, size_t coded_bytes, const uint8_t *raw, size_t raw_bytes,
                                        struct firn_stretches_read_work *work, firn_segment_teller *tell, void *self);

#endif
