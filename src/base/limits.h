/*
 * base/limits.h - the named limits that a size from a file meets before it meets an allocator
 *
 * Room: base. Numbers of the format stand in format-spec/; here is what this implementation refuses beyond.
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_BASE_LIMITS_H
#define FIRN_BASE_LIMITS_H

enum {
    FIRN_LIMIT_SEGMENT_RAW_BYTES = 1 << 20,      /* format-spec/segment.md: one coded stretch, before coding */
    FIRN_LIMIT_SHEET_BLOCKS = 1 << 16,           /* format-spec/sheet.md: 256 MiB; a rebuild holds one sheet */
    FIRN_LIMIT_BATCH_RAW_BYTES = 1 << 23,        /* format-spec/catalogue.md: entries of one BATCH, before coding */
    FIRN_LIMIT_ENTRY_BYTES = 1 << 21,            /* one catalogue entry: pax header and extents */
    FIRN_LIMIT_PART_SEGMENTS = 1 << 12,          /* segments told of by one part of the catalogue */
    FIRN_LIMIT_PART_SUMS = 1 << 16,              /* sums told of by one part of the catalogue */
    FIRN_LIMIT_TEXT_BYTES = 1 << 24,             /* SPEC, READER, COLOPHON bodies */
    FIRN_LIMIT_THREADS = 256
};

#endif
