/*
 * tests/fuzz/fuzz_catalogue.c - any bytes, sealed with a right hash, as BATCH, SUMS and INDEX; and as decoded entries
 */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "container/catalogue.h"

#include "base/limits.h"
#include "firn/segment.h"
#include "guard/hash.h"

#include <stdlib.h>
#include <string.h>

int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size);

enum { BODY_MAX = 1 << 16 };

static struct firn_item_extent extents[FIRN_ITEM_EXTENTS_MAX];

/* Whatever the entries say: items stay within the bytes, content space only grows. */
static void step_through(const struct firn_catalogue_batch *batch, const uint8_t *raw)
{
    struct firn_catalogue_cursor cursor;
    uint64_t at = batch->content_at;
    struct firn_item item;

    firn_catalogue_cursor_start(batch, raw, extents, &cursor);
    while (firn_catalogue_next(&cursor, &item) == FIRN_OK) {
        if (item.pax < raw || item.pax + item.pax_bytes > raw + batch->raw_bytes || item.content_at < at ||
            item.stored_bytes > item.bytes)
            abort();
        at = item.content_at + item.stored_bytes;
    }
}

int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size)
{
    static uint8_t body[BODY_MAX], *raw;
    static void *work;
    struct firn_catalogue_batch batch;
    struct firn_catalogue_index index;
    static struct firn_catalogue_sum sums[BODY_MAX / FIRN_CATALOGUE_SUM_BYTES];
    uint32_t count;

    if (raw == NULL) {
        raw = malloc(FIRN_LIMIT_BATCH_RAW_BYTES);
        if (raw == NULL || posix_memalign(&work, 64, firn_segment_decode_work_bytes()) != 0)
            abort();
    }
    if (size <= FIRN_HASH_BYTES || size > BODY_MAX)
        return 0;
    memcpy(body, data, size);
    firn_hash_put(body + FIRN_HASH_BYTES, size - FIRN_HASH_BYTES, body);
    if (firn_catalogue_open_batch(body, size, &batch) == FIRN_OK &&
        firn_catalogue_decode_batch(&batch, raw, work) == FIRN_OK)
        step_through(&batch, raw);
    if (firn_catalogue_count_sums(body, size, &count) == FIRN_OK && firn_catalogue_get_sums(body, sums) == FIRN_OK)
        for (uint32_t i = 1; i < count; i++)
            if (sums[i].item <= sums[i - 1].item)
                abort();
    if (firn_catalogue_open_index(body, size, &index) == FIRN_OK) {
        struct firn_catalogue_place place;

        for (uint32_t i = 0; i < index.segments; i++)
            (void)firn_catalogue_get_place(index.place_bytes + (size_t)i * FIRN_CATALOGUE_PLACE_BYTES, &place);
        if (index.place_bytes + (size_t)index.segments * FIRN_CATALOGUE_PLACE_BYTES != body + size)
            abort();
    }
    batch = (struct firn_catalogue_batch){ .items = 1 + data[0] % 8, .raw_bytes = (uint32_t)size };
    memcpy(raw, data, size);
    step_through(&batch, raw);
    return 0;
}
