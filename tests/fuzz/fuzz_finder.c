/*
 * tests/fuzz/fuzz_finder.c - sources made of any bytes, with sealed blocks of odd tags at odd places: what is told of
 * lies within the source and is what stands there; put in order, every place can be read
 */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "container/finder.h"

#include <stdlib.h>
#include <string.h>

enum { ROOM = 256 << 10 };

int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size);

static uint8_t source[ROOM];
static size_t used;

/* A piece: a letter, a length, its bytes. `B` is a sealed block, `F` flips bits in what is there, else plain bytes. */
static size_t add_piece(const uint8_t *data, size_t size)
{
    size_t length = data[1], there = size - 2 < length ? size - 2 : length;
    struct firn_block_tag tag = { .version = FIRN_BLOCK_FORMAT_VERSION };
    uint8_t *at = source + used;

    if (data[0] == 'B' && there >= 8) {
        struct firn_sheet_shape shape;
        uint32_t full;

        tag.geometry = (struct firn_sheet_geometry){ data[2], data[3], (uint16_t)(1 + data[4]) };
        tag.data_blocks = data[5];
        tag.id[0] = data[6];
        tag.number = data[7] & 0x80 ? (uint64_t)data[7] << 50 : data[7] + data[8] * UINT64_C(128);
        if (!firn_sheet_geometry_valid(&tag.geometry) ||
            firn_sheet_shape_of(&tag.geometry, tag.data_blocks, &shape) != FIRN_OK)
            return there + 2;
        full = firn_sheet_full_blocks(&tag.geometry);
        tag.kind = tag.number % full < tag.data_blocks ? FIRN_BLOCK_DATA : FIRN_BLOCK_RESERVE;
        memset(at, data[9], FIRN_BLOCK_BYTES);
        firn_block_seal(at, &tag);
        used += FIRN_BLOCK_BYTES;
    } else if (data[0] == 'F' && used >= FIRN_BLOCK_BYTES) {
        for (size_t i = 0; i + 1 < there; i += 2)
            source[used - 1 - (data[2 + i] * 256U + data[3 + i]) % FIRN_BLOCK_BYTES] ^= (uint8_t)(1U << i % 8);
    } else {
        memcpy(at, data + 2, there);
        used += there;
    }
    return there + 2;
}

static enum firn_status check_block(void *self, const struct firn_finder_block *block)
{
    const uint8_t *original = self;

    if (block->at > used || used - block->at < FIRN_BLOCK_BYTES || !firn_sheet_geometry_valid(&block->tag.geometry))
        abort();
    if (block->state != FIRN_BLOCK_MENDED && memcmp(block->bytes, original + block->at, FIRN_BLOCK_BYTES) != 0)
        abort();
    if (block->page != NULL && (block->at < FIRN_BLOCK_BYTES || block->page + FIRN_BLOCK_BYTES != block->bytes))
        abort();
    return FIRN_OK;
}

int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size)
{
    static uint8_t bytes[4 * FIRN_BLOCK_BYTES];
    struct firn_store_buffer buffer;
    struct firn_store store, realigned;
    struct firn_finder_visitor visitor = { .self = source, .block = check_block };
    struct firn_finder_report report;
    struct firn_fault fault;
    uint64_t stretches, end;
    size_t got;
    int why;

    used = 0;
    while (size >= 2 && used + 2 * FIRN_BLOCK_BYTES < ROOM) {
        size_t step = add_piece(data, size);

        data += step;
        size -= step;
    }
    buffer = (struct firn_store_buffer){ source, ROOM, used };
    firn_store_memory(&buffer, &store);
    if (firn_finder_run(&store, firn_memory_system(), &visitor, &report, &fault) != FIRN_OK || report.bytes != used)
        abort();
    if (firn_store_realign(&store, NULL, firn_memory_system(), &realigned, &stretches, &fault) != FIRN_OK)
        return 0;
    if (stretches == 0 || realigned.size(realigned.self, &end, &why) != FIRN_OK)
        abort();
    for (unsigned i = 0; i < 16; i++)      /* the file may be absurdly long */
        if (realigned.read_at(realigned.self, end / 16 * i + i * 77, bytes, sizeof bytes, &got, &why) != FIRN_OK)
            abort();
    realigned.close(realigned.self);
    return 0;
}
