/*
 * tests/fuzz/fuzz_rescue.c - a small row, changed in any way: whatever is called back must be what was written
 *
 * The first byte chooses the row and the second which of its blocks are gone. Then come changes: block, offset (two
 * bytes, little-endian), how many bytes less one, and these bytes, which are added to what is there.
 */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "firn/reserve.h"
#include "guard/deep.h"
#include "guard/rescue.h"

#include <stdlib.h>
#include <string.h>

int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size);

enum { MOST = 24 };

static const struct { unsigned k, m; } shapes[] = { { 1, 4 }, { 3, 4 }, { 12, 4 }, { 12, 8 }, { 8, 16 } };

static uint8_t written[MOST][FIRN_BLOCK_BYTES], read[MOST][FIRN_BLOCK_BYTES], states[MOST];
static struct firn_block_tag tags[MOST];
static uint8_t *blocks[MOST];

static uint8_t *lend(size_t bytes)
{
    uint8_t *work = aligned_alloc(64, (bytes + 63) / 64 * 64);

    if (work == NULL)
        abort();
    return work;
}

static void write_row(unsigned k, unsigned m)
{
    uint8_t *work = lend(firn_reserve_work_bytes());
    const uint8_t *payloads[MOST];
    uint8_t *reserve[MOST];

    for (unsigned i = 0; i < k; i++) {
        for (unsigned b = 0; b < FIRN_BLOCK_PAYLOAD_BYTES; b++)
            written[i][b] = (uint8_t)(b * (2 * i + 3) ^ b >> 5);
        payloads[i] = written[i];
    }
    for (unsigned j = 0; j < m; j++)
        reserve[j] = written[k + j];
    if (firn_reserve_encode(k, m, payloads, reserve, FIRN_BLOCK_PAYLOAD_BYTES, work) != FIRN_OK)
        abort();
    for (unsigned i = 0; i < k + m; i++) {
        tags[i] = (struct firn_block_tag){
            .version = FIRN_BLOCK_FORMAT_VERSION, .kind = i < k ? FIRN_BLOCK_DATA : FIRN_BLOCK_RESERVE,
            .geometry = { (uint8_t)k, (uint8_t)m, 1 }, .id = { 7, 7, 7 }, .number = i, .data_blocks = k
        };
        firn_block_seal(written[i], &tags[i]);
        blocks[i] = read[i];
    }
    memcpy(read, written, sizeof read);
    free(work);
}

static void change(const uint8_t *data, size_t size, unsigned positions)
{
    while (size >= 4) {
        unsigned at = data[1] | (unsigned)data[2] << 8, count = 1 + data[3];
        uint8_t *block = read[data[0] % positions];

        for (unsigned i = 0; i < count && i + 4 < size; i++)
            block[(at + i) % FIRN_BLOCK_BYTES] ^= data[4 + i];
        if (size - 4 <= count)
            return;
        data += 4 + count;
        size -= 4 + count;
    }
}

static bool as_written(unsigned i)
{
    return memcmp(blocks[i], written[i], FIRN_BLOCK_BYTES) == 0;
}

int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size)
{
    struct firn_rescue_row row = { .blocks = blocks, .tags = tags, .states = states };
    struct firn_rescue_report report;
    enum firn_status status;
    unsigned positions, missing = 0;
    uint8_t *work;

    if (size < 2)
        return 0;
    row.k = shapes[data[0] % 5].k;
    row.m = shapes[data[0] % 5].m;
    positions = row.k + row.m;
    write_row(row.k, row.m);
    change(data + 2, size - 2, positions);
    for (unsigned i = 0; i < positions; i++) {
        struct firn_block_tag tag;
        enum firn_block_state found = firn_block_open(read[i], true, &tag);

        states[i] = found == FIRN_BLOCK_SOUND || found == FIRN_BLOCK_MENDED ? FIRN_RESCUE_KNOWN : FIRN_RESCUE_READ;
        if (states[i] == FIRN_RESCUE_KNOWN && !as_written(i))      /* sealed anew by chance: out of reach */
            abort();
        if (states[i] == FIRN_RESCUE_READ && (data[1] >> i % 8 & 1) != 0)
            states[i] = FIRN_RESCUE_GONE;
    }
    work = lend(firn_rescue_work_bytes());
    status = firn_rescue_row(&row, &report, work);
    free(work);
    for (unsigned i = 0; i < positions; i++) {
        if ((states[i] == FIRN_RESCUE_READ || states[i] == FIRN_RESCUE_GONE) && ++missing > 0) {
            if (status == FIRN_OK || (firn_deep_mend(blocks[i], &tags[i]) && !as_written(i)))
                abort();
        } else if (!as_written(i)) {
            abort();
        }
    }
    if (status == FIRN_BEYOND_REPAIR && missing <= row.m)
        abort();
    return 0;
}
