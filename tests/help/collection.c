/* tests/help/collection.c - an invented collection, packed in memory and read back against what went in */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "help/collection.h"

#include <stdio.h>
#include <stdlib.h>
#include <string.h>

static uint64_t mix(uint64_t x)
{
    x ^= x >> 31;
    x *= UINT64_C(0x9E3779B97F4A7C15);
    x ^= x >> 29;
    x *= UINT64_C(0xBF58476D1CE4E5B9);
    return x ^ x >> 32;
}

/* Mostly small files, some folders and empty files, every fortieth one large, every seventh one with holes. */
static bool is_folder(uint64_t number)
{
    return number % 10 == 0;
}

uint64_t collection_item_bytes(uint64_t seed, uint64_t number)
{
    uint64_t random = mix(seed * 1000003 + number);

    if (is_folder(number) || number % 10 == 1)
        return 0;
    if (number % 40 == 7)
        return 200000 + random % 1500000;
    return 1 + random % 6000;
}

uint8_t collection_byte(uint64_t seed, uint64_t number, uint64_t at)
{
    uint64_t random = mix(seed + number * 131 + (at >> 3));

    if (number % 3 == 0)
        return (uint8_t)("the ledgers of Marrow Quay "[(at + number) % 27]);
    if (number % 3 == 1)
        return (uint8_t)(random >> at % 8 * 8);
    return (uint8_t)((random >> 60) + at % 16);
}

void collection_pax(uint64_t seed, uint64_t number, uint8_t pax[1024])
{
    memset(pax, 0, 1024);
    snprintf((char *)pax, 1024, "invented pax header of item %llu in collection %llu", (unsigned long long)number,
             (unsigned long long)seed);
}

/* Up to two extents: with holes, the middle third of the file is not stored. */
static size_t extents_of(uint64_t number, uint64_t bytes, struct firn_item_extent extents[2])
{
    uint64_t third = bytes / 3;

    if (bytes == 0)
        return 0;
    if (number % 7 != 0 || third == 0) {
        extents[0] = (struct firn_item_extent){ 0, bytes };
        return 1;
    }
    extents[0] = (struct firn_item_extent){ 0, third };
    extents[1] = (struct firn_item_extent){ 2 * third, bytes - 2 * third };
    return 2;
}

static enum firn_status pack_content(struct firn_writer *writer, uint64_t seed, uint64_t number,
                                     const struct firn_item_extent *extents, size_t extent_count)
{
    uint8_t bytes[5000];

    for (size_t i = 0; i < extent_count; i++)
        for (uint64_t done = 0; done < extents[i].bytes;) {
            uint64_t left = extents[i].bytes - done;
            size_t step = left < sizeof bytes ? (size_t)left : sizeof bytes;
            enum firn_status status;

            for (size_t j = 0; j < step; j++)
                bytes[j] = collection_byte(seed, number, extents[i].at + done + j);
            status = firn_writer_content(writer, bytes, step);
            if (status != FIRN_OK)
                return status;
            done += step;
        }
    return FIRN_OK;
}

enum firn_status collection_pack(struct firn_writer *writer, unsigned items, uint64_t seed)
{
    for (uint64_t number = 0; number < items; number++) {
        struct firn_item_extent extents[2];
        uint8_t pax[1024];
        struct firn_item item = {
            .pax = pax, .pax_bytes = sizeof pax, .has_content = !is_folder(number),
            .bytes = collection_item_bytes(seed, number), .extents = extents
        };
        enum firn_status status;

        item.extent_count = extents_of(number, item.bytes, extents);
        collection_pax(seed, number, pax);
        status = firn_writer_item(writer, &item);
        if (status == FIRN_OK)
            status = pack_content(writer, seed, number, extents, item.extent_count);
        if (status == FIRN_OK)
            status = firn_writer_end(writer, NULL);
        if (status != FIRN_OK)
            return status;
    }
    return FIRN_OK;
}

static void insist(enum firn_status status, const char *what)
{
    if (status == FIRN_OK)
        return;
    fprintf(stderr, "collection: %s: %s\n", what, firn_status_text(status));
    exit(1);
}

struct collection *collection_make(unsigned items, uint64_t seed, const struct firn_sheet_geometry *geometry,
                                   unsigned threads)
{
    enum { CONTAINER_ROOM = 48 << 20, SPOOL_ROOM = 16 << 20 };
    struct collection *c = calloc(1, sizeof *c);
    struct firn_store_buffer spool_buffer = { .bytes = malloc(SPOOL_ROOM), .capacity = SPOOL_ROOM };
    struct firn_store store, spool;
    struct firn_writer_options options = { .store = &store,
                                           .spool = &spool,
                                           .memory = firn_memory_system(),
                                           .threads = threads,
                                           .geometry = *geometry,
                                           /* stored: the number of blocks shall not depend on the coder */
                                           .effort = FIRN_SEGMENT_EFFORT_NONE,
                                           .title = { .accession = "MQ 1931/7",
                                                      .title = "Ledgers of Marrow Quay",
                                                      .custodian = "Harbour Archive",
                                                      .date = 0 } };
    struct firn_fault fault = { 0 };
    struct firn_writer *writer;

    c->buffer = (struct firn_store_buffer){ .bytes = malloc(CONTAINER_ROOM), .capacity = CONTAINER_ROOM };
    c->seed = seed;
    c->items = items;
    firn_store_memory(&c->buffer, &store);
    firn_store_memory(&spool_buffer, &spool);
    insist(firn_writer_make(&options, &fault, &writer), "making a writer");
    insist(collection_pack(writer, items, seed), "packing");
    insist(firn_writer_finish(writer, &c->totals), fault.what);
    firn_writer_free(writer);
    store.close(store.self);
    spool.close(spool.self);
    free(spool_buffer.bytes);
    return c;
}

void collection_free(struct collection *collection)
{
    free(collection->buffer.bytes);
    free(collection);
}

/* --- reading --- */

struct reading {
    struct collection *collection;
    struct collection_result *result;
    uint64_t good, gaps;
};

static enum firn_status begin(void *self, const struct firn_item *item, uint64_t foreseen)
{
    struct reading *reading = self;
    uint8_t pax[1024];

    (void)foreseen;
    collection_pax(reading->collection->seed, item->number, pax);
    reading->good = reading->gaps = 0;
    reading->result->items++;
    reading->result->wrong += item->pax_bytes != sizeof pax || memcmp(item->pax, pax, sizeof pax) != 0;
    reading->result->wrong += item->bytes != collection_item_bytes(reading->collection->seed, item->number);
    return FIRN_OK;
}

static enum firn_status bytes_come(void *self, const struct firn_item *item, uint64_t at, const uint8_t *bytes,
                                   size_t count)
{
    struct reading *reading = self;

    for (size_t i = 0; i < count; i++)
        reading->result->wrong += bytes[i] != collection_byte(reading->collection->seed, item->number, at + i);
    reading->good += count;
    return FIRN_OK;
}

static enum firn_status gap(void *self, const struct firn_item *item, uint64_t at, uint64_t count,
                            enum firn_reader_loss why, uint64_t container_at)
{
    struct reading *reading = self;

    (void)item, (void)at, (void)why, (void)container_at;
    reading->gaps += count;
    return FIRN_OK;
}

static enum firn_status end(void *self, const struct firn_item *item, const struct firn_reader_outcome *outcome)
{
    struct reading *reading = self;

    reading->result->wrong += reading->good + reading->gaps != item->stored_bytes;
    reading->result->wrong += outcome->lost_bytes != reading->gaps;
    if (reading->gaps > 0)
        reading->result->gapped++;
    else
        reading->result->whole++;
    if (item->has_content && outcome->sum_known && !outcome->sum_right && reading->gaps == 0)
        reading->result->wrong++;
    return FIRN_OK;
}

struct collection_result collection_read(struct collection *collection, unsigned threads)
{
    struct collection_result result = { .status = FIRN_OK };
    struct firn_store store;
    struct firn_reader_options options = { .store = &store, .memory = firn_memory_system(), .threads = threads };
    struct reading reading = { .collection = collection, .result = &result };
    struct firn_reader_visitor visitor = {
        .self = &reading, .begin = begin, .bytes = bytes_come, .gap = gap, .end = end
    };
    struct firn_fault fault;
    struct firn_reader *reader;

    firn_store_memory(&collection->buffer, &store);
    result.status = firn_reader_open(&options, &fault, &reader);
    if (result.status == FIRN_OK) {
        result.layout = *firn_reader_layout_of(reader);
        result.status = firn_reader_walk(reader, &visitor, &fault, &result.report);
        firn_reader_damage_so_far(reader, &result.damage);
        firn_reader_free(reader);
    }
    store.close(store.self);
    return result;
}
