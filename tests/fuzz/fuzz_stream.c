/* tests/fuzz/fuzz_stream.c - a container whose blocks and record headers are right and whose bodies are anything */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "container/press.h"
#include "container/record.h"
#include "firn/reader.h"
#include "guard/hash.h"

#include <stdlib.h>
#include <string.h>

int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size);

enum { ROOM = 1 << 20 };

static enum firn_status take_bytes(void *self, const struct firn_item *item, uint64_t at, const uint8_t *bytes,
                                   size_t count)
{
    (void)self, (void)bytes;
    if (at > item->bytes || count > item->bytes - at)
        abort();
    return FIRN_OK;
}

static enum firn_status take_end(void *self, const struct firn_item *item, const struct firn_reader_outcome *outcome)
{
    (void)self;
    if (outcome->lost_bytes > item->stored_bytes)
        abort();
    return FIRN_OK;
}

static enum firn_status take_segment(void *self, const struct firn_reader_segment *segment)
{
    (void)self;
    return segment->raw_bytes == 0 ? FIRN_BAD_DATA : FIRN_OK;
}

static void read_it(struct firn_store *store)
{
    struct firn_reader_options options = { .store = store, .memory = firn_memory_system(), .threads = 1 };
    struct firn_reader_visitor visitor = { .bytes = take_bytes, .end = take_end };
    struct firn_reader_walk_report report;
    struct firn_fault fault;
    struct firn_reader *reader;

    if (firn_reader_open(&options, &fault, &reader) != FIRN_OK)
        abort();
    (void)firn_reader_walk(reader, &visitor, &fault, &report);
    (void)firn_reader_segments(reader, take_segment, NULL, &fault);
    firn_reader_free(reader);
}

/* Input: records, each a type, a length (u16) and a body; a body of an even type gets its seal put right. */
int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size)
{
    static const struct firn_sheet_geometry geometry = { .k = 14, .m = 4, .depth = 8 };
    static uint8_t room[ROOM];
    static const uint8_t page[4096], nonce[16];
    struct firn_store_buffer buffer = { .bytes = room, .capacity = sizeof room };
    struct firn_store store;
    struct firn_threads *threads;
    struct firn_press *press;
    struct firn_press_totals totals;

    if (size < 3 || size > 60000)
        return 0;
    firn_store_memory(&buffer, &store);
    if (firn_threads_make(firn_memory_system(), 1, &threads) != FIRN_OK ||
        firn_press_make(&(struct firn_press_options){ .store = &store,
                                                      .memory = firn_memory_system(),
                                                      .threads = threads,
                                                      .geometry = geometry,
                                                      .nonce = nonce,
                                                      .page = page },
                        &press) != FIRN_OK)
        abort();
    while (size >= 3) {
        uint8_t header[FIRN_RECORD_HEADER_BYTES], *body;
        struct firn_record record = { .type = data[0] & 0x7F, .at = firn_press_at(press) };
        size_t length = data[1] | (size_t)data[2] << 8;

        length = length < size - 3 ? length : size - 3;
        body = malloc(length + 1);
        memcpy(body, data + 3, length);
        if ((data[0] & 0x80) != 0 && length > FIRN_HASH_BYTES)
            firn_hash_put(body + FIRN_HASH_BYTES, length - FIRN_HASH_BYTES, body);
        record.body_bytes = length;
        firn_record_put(&record, header);
        if (firn_press_put(press, header, sizeof header, NULL) != FIRN_OK ||
            firn_press_put(press, body, length, NULL) != FIRN_OK ||
            firn_press_put_zeros(press, (size_t)(firn_record_span(length) - sizeof header - length), NULL) != FIRN_OK)
            abort();
        free(body);
        data += 3 + length;
        size -= 3 + length;
    }
    if (firn_press_finish(press, NULL, &totals) != FIRN_OK)
        abort();
    firn_press_free(press);
    firn_threads_free(threads);
    read_it(&store);
    store.close(store.self);
    return 0;
}
