/*
 * guard/lanes.c - 64 words of the extended Hamming code [512, 502, 4] side by side in every block
 *
 * The syndrome of a lane is the label of its flipped bit (labels: format-spec/block.md), and the overall parity tells
 * one flip from two.
 * SPDX-License-Identifier: BSD-2-Clause
 */
#include "firn/lanes.h"

#include "base/bytes.h"
#include "guard/lanes_engine.h"

#include <stddef.h>
#include <string.h>

enum { GUARD_AT = 8 * FIRN_LANES_DATA_WORDS, OVERALL = FIRN_LANES_PARITY_WORDS };

const struct firn_lanes_engine *const firn_lanes_engines[] = {
#if defined(__x86_64__) && !defined(FIRN_PLAIN)
    &firn_lanes_avx2,
#endif
    &firn_lanes_plain,
    NULL,
};

const struct firn_lanes_engine *firn_lanes_engine_here(void)
{
    unsigned i = 0;

    while (!firn_lanes_engines[i]->usable())
        i++;
    return firn_lanes_engines[i];
}

unsigned firn_lanes_word_of(unsigned label)
{
    unsigned bit = 0;

    if (label == 0)
        return FIRN_BLOCK_WORDS - 1;
    while (label >> (bit + 1) != 0)
        bit++;
    return label == 1U << bit ? FIRN_LANES_DATA_WORDS + bit : label - 2 - bit;
}

void firn_lanes_guard(uint8_t *block)
{
    uint64_t syndrome[FIRN_LANES_SYNDROME_WORDS];

    memset(block + GUARD_AT, 0, 8 * FIRN_LANES_SYNDROME_WORDS);
    firn_lanes_engine_here()->syndrome(block, syndrome);
    for (unsigned j = 0; j < FIRN_LANES_PARITY_WORDS; j++) {
        syndrome[OVERALL] ^= syndrome[j];
        firn_bytes_put64(block + GUARD_AT + 8 * j, syndrome[j]);
    }
    firn_bytes_put64(block + GUARD_AT + 8 * OVERALL, syndrome[OVERALL]);
}

bool firn_lanes_check(const uint8_t *block)
{
    uint64_t syndrome[FIRN_LANES_SYNDROME_WORDS], any = 0;

    firn_lanes_engine_here()->syndrome(block, syndrome);
    for (unsigned j = 0; j < FIRN_LANES_SYNDROME_WORDS; j++)
        any |= syndrome[j];
    return any == 0;
}

static unsigned count_bits(uint64_t word)
{
    unsigned count = 0;

    for (; word != 0; word &= word - 1)
        count++;
    return count;
}

/* Flips the bit of one lane in the word whose label is the lane's syndrome. */
static void mend_lane(uint8_t *block, unsigned lane, const uint64_t syndrome[FIRN_LANES_SYNDROME_WORDS])
{
    unsigned label = 0;
    uint8_t *at;

    for (unsigned j = 0; j < FIRN_LANES_PARITY_WORDS; j++)
        label |= (unsigned)(syndrome[j] >> lane & 1) << j;
    at = block + 8 * (size_t)firn_lanes_word_of(label);
    firn_bytes_put64(at, firn_bytes_get64(at) ^ UINT64_C(1) << lane);
}

enum firn_status firn_lanes_mend(uint8_t *block, struct firn_lanes_report *report)
{
    uint64_t syndrome[FIRN_LANES_SYNDROME_WORDS], odd, wrong;

    firn_lanes_engine_here()->syndrome(block, syndrome);
    odd = wrong = syndrome[OVERALL];
    for (unsigned j = 0; j < FIRN_LANES_PARITY_WORDS; j++)
        wrong |= syndrome[j];
    for (unsigned lane = 0; lane < FIRN_LANES; lane++)
        if ((odd >> lane & 1) != 0)
            mend_lane(block, lane, syndrome);
    *report = (struct firn_lanes_report){
        .clean = FIRN_LANES - count_bits(wrong), .mended = count_bits(odd), .beyond = count_bits(wrong & ~odd),
    };
    return report->beyond == 0 ? FIRN_OK : FIRN_BEYOND_REPAIR;
}
