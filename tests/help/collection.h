/*
 * tests/help/collection.h - an invented collection, packed in memory and read back against what went in
 *
 * Items are numbered; the content of item n follows from n and the seed alone, so that whoever reads can tell right
 * bytes from wrong ones without keeping them.
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_TESTS_COLLECTION_H
#define FIRN_TESTS_COLLECTION_H

#include "firn/reader.h"
#include "firn/writer.h"

struct collection {
    struct firn_store_buffer buffer;
    struct firn_writer_totals totals;
    uint64_t seed;
    unsigned items;
};

struct collection_result {
    enum firn_status status;
    struct firn_reader_layout layout;
    struct firn_reader_damage damage;
    struct firn_reader_walk_report report;
    unsigned items, whole, gapped;
    unsigned wrong;      /* bytes handed out as good that are not what went in, headers not as packed, sums that lie */
};

/* Packs; stops the test program when that fails. */
struct collection *collection_make(unsigned items, uint64_t seed, const struct firn_sheet_geometry *geometry,
                                   unsigned threads);
void collection_free(struct collection *collection);

/* Reads everything from the buffer as it stands now. */
struct collection_result collection_read(struct collection *collection, unsigned threads);

/* What item `number` looks like: size of its content, byte `at` of it, its pax header (1024 bytes). */
uint64_t collection_item_bytes(uint64_t seed, uint64_t number);
uint8_t collection_byte(uint64_t seed, uint64_t number, uint64_t at);
void collection_pax(uint64_t seed, uint64_t number, uint8_t pax[1024]);

/* Packs the items into any writer, one after the other. */
enum firn_status collection_pack(struct firn_writer *writer, unsigned items, uint64_t seed);

#endif
