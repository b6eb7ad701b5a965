/*
 * container/decoder.h - raw bytes of segments, several decoded at a time
 *
 * Room: container. Reads ahead along a part's places while they are asked for in order.
 *
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_CONTAINER_DECODER_H
#define FIRN_CONTAINER_DECODER_H

#include "base/threads.h"
#include "container/catalogue.h"
#include "container/sheets.h"

struct firn_decoder;

enum firn_status firn_decoder_make(struct firn_sheets *sheets, const struct firn_memory *memory, unsigned threads,
                                   struct firn_decoder **out);
void firn_decoder_free(struct firn_decoder *decoder);      /* takes NULL */

/* Forgets what was read ahead: the places belong to another part now. */
void firn_decoder_forget(struct firn_decoder *decoder);

/* A segment; lent until the next call. */
struct firn_decoder_segment {
    const uint8_t *raw;            /* place.raw_bytes, verified */
    const uint8_t *coded;          /* what it was decoded from */
    size_t coded_bytes;
    uint64_t container_at;         /* on FIRN_LOST: file offset of the first block that is lost */
    uint64_t first_lost, last_lost, lost_blocks;      /* their numbers, and how many there are; 0 when nobody knows */
};

/*
 * Decodes places[index].
 *
 * FIRN_OK
 * FIRN_LOST      blocks of it are lost
 * FIRN_MISMATCH  its bytes are no segment, or do not satisfy its hash
 * else           FIRN_NO_MEMORY, FIRN_STOPPED
 */
enum firn_status firn_decoder_get(struct firn_decoder *decoder, const struct firn_catalogue_place *places, size_t count,
                                  size_t index, struct firn_decoder_segment *segment);

#endif
