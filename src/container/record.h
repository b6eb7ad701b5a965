/*
 * container/record.h - the pieces of the stream, each with a header that can be found again after a gap
 *
 * Room: container. A record starts at a multiple of 32 in the stream, so its header never straddles two blocks; the
 * header names its own place, so that a header copied into some file's content is not taken for one. Layout:
 * format-spec/stream.md.
 *
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_CONTAINER_RECORD_H
#define FIRN_CONTAINER_RECORD_H

#include <stdbool.h>
#include <stdint.h>

enum { FIRN_RECORD_HEADER_BYTES = 32, FIRN_RECORD_ALIGNMENT = 32 };

enum firn_record_type {
    FIRN_RECORD_TITLE = 1,
    FIRN_RECORD_SPEC = 2,
    FIRN_RECORD_READER = 3,
    FIRN_RECORD_BATCH = 4,
    FIRN_RECORD_SEGMENT = 5,
    FIRN_RECORD_SUMS = 6,
    FIRN_RECORD_INDEX = 7,
    FIRN_RECORD_COLOPHON = 8
};

struct firn_record {
    unsigned type;            /* an enum firn_record_type, or one that a later writer knows: to be passed over */
    uint64_t at;              /* of the header in the stream */
    uint64_t body_bytes;
};

void firn_record_put(const struct firn_record *record, uint8_t header[FIRN_RECORD_HEADER_BYTES]);

/* True when header is the header of a record at `at`. */
bool firn_record_get(const uint8_t header[FIRN_RECORD_HEADER_BYTES], uint64_t at, struct firn_record *record);

/* Header, body and padding: how far the next record is. */
uint64_t firn_record_span(uint64_t body_bytes);

#endif
