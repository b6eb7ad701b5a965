/*
 * coding/streams.h - the words of a stretch, in one bitstream or in six side by side
 *
 * Room: coding. Pure. Stream s of six codes the s-th sixth of the stretch (bytes / 6 rounded down; the last takes
 * what is left), so that six look-ups that do not wait for one another are under way at any time. Eight would spill
 * registers. Each stream starts on a byte boundary; words are written most significant bit first; the last byte is
 * filled up with zeros.
 *
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_CODING_STREAMS_H
#define FIRN_CODING_STREAMS_H

#include "coding/table.h"

#include "firn/status.h"

#include <stddef.h>
#include <stdint.h>

enum {
    FIRN_STREAMS_MAX = 6,
    FIRN_STREAMS_ENTRIES = 1 << FIRN_TABLE_LENGTH_LIMIT
};

/*
 * Writes one stream.
 *
 * words   in   canonical words of the lengths
 * room    out  where to write; at most room_bytes are touched, which must be enough for the stream itself
 *
 * Returns the bytes written.
 */
size_t firn_streams_write(const uint8_t *raw, size_t raw_bytes, const uint8_t lengths[FIRN_TABLE_SYMBOLS],
                          const uint16_t words[FIRN_TABLE_SYMBOLS], uint8_t *room, size_t room_bytes);

/*
 * entries[the next 11 bits] = symbol << 8 | length of its word. The lengths are those of a full code, so none is left
 * out.
 */
void firn_streams_prepare(const uint8_t lengths[FIRN_TABLE_SYMBOLS], uint16_t entries[FIRN_STREAMS_ENTRIES]);

/*
 * Decodes `streams` (1 or 6) bitstreams into raw.
 *
 * starts     streams + 1 places in coded, ascending, none beyond coded_bytes: stream s lies in starts[s] .. starts[s
 * + 1] raw_bytes  at least 1, and at least 6 for six streams
 *
 * FIRN_OK: every stream was used up exactly and filled up with zeros. Otherwise FIRN_BAD_DATA. Reads nothing outside
 * coded[0 .. coded_bytes) and writes nothing outside raw[0 .. raw_bytes), whatever the bytes are.
 */
enum firn_status firn_streams_read(const uint8_t *coded, size_t coded_bytes, const size_t *starts, unsigned streams,
                                   const uint16_t entries[FIRN_STREAMS_ENTRIES], uint8_t *raw, size_t raw_bytes);

#endif
