/* tests/fuzz/fuzz_container.c - any bytes as a container file */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "firn/reader.h"

#include <stdlib.h>
#include <string.h>

int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size);

static enum firn_status take_bytes(void *self, const struct firn_item *item, uint64_t at, const uint8_t *bytes,
                                   size_t count)
{
    (void)self, (void)bytes;
    if (at > item->bytes || count > item->bytes - at)
        abort();
    return FIRN_OK;
}

int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size)
{
    uint8_t *copy = malloc(size + 1), page[4096];
    struct firn_store_buffer buffer = { .bytes = copy, .capacity = size, .used = size };
    struct firn_store store;
    struct firn_reader_options options = { .store = &store, .memory = firn_memory_system(), .threads = 1 };
    struct firn_reader_visitor visitor = { .bytes = take_bytes };
    struct firn_reader_walk_report report;
    struct firn_fault fault;
    struct firn_reader *reader;

    memcpy(copy, data, size);
    firn_store_memory(&buffer, &store);
    if (firn_reader_open(&options, &fault, &reader) == FIRN_OK) {
        (void)firn_reader_title_page(reader, page);
        (void)firn_reader_walk(reader, &visitor, &fault, &report);
        firn_reader_free(reader);
    }
    store.close(store.self);
    free(copy);
    return 0;
}
