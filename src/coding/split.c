/*
 * coding/split.c - the search for the cheapest cuts
 *
 * best[j] = min over i < j of best[i] + price(i, j). Pricing a stretch exactly takes an optimal code, so candidates
 * are looked at in the order of a lower bound and the search for a j ends when no bound is below the best price
 * found: the result is the same as without bounds. Two facts give the bound for the words of stretch i .. j: they
 * take no fewer bits than the entropy says, and no fewer than the words of i .. j - 1 and of the last cell under
 * codes of their own.
 *
 * Whole numbers only, so that every machine makes the same cuts.
 * SPDX-License-Identifier: BSD-2-Clause
 */
#include "coding/split.h"

#include "coding/histogram.h"
#include "coding/table.h"

#include "firn/prefix.h"

#include <string.h>

enum {
    SOLID_FRAMING_BITS = 8 * 4,        /* kind and length of a stretch */
    PREFIX_FRAMING_BITS = 8 * 12 + 24, /* also six stream lengths, and half a byte for the end of each */
    LOG_BITS = FIRN_SPLIT_LOG_BITS,
    LOG_SLACK = 49                     /* log_table and straight lines between its entries are low by less: 2 + 46.2 */
};

/* 2^24 * log2(1 + k / 256), rounded down; tests/coding/test_split.c computes it again. */
static const uint32_t log_table[257] = {
    0, 94364, 188362, 281996, 375269, 468184, 560744, 652952, 744809, 836319,
    927485, 1018308, 1108792, 1198939, 1288751, 1378232, 1467382, 1556206, 1644705, 1732881,
    1820738, 1908276, 1995500, 2082410, 2169009, 2255299, 2341283, 2426962, 2512339, 2597416,
    2682195, 2766679, 2850868, 2934765, 3018373, 3101693, 3184727, 3267477, 3349946, 3432134,
    3514044, 3595678, 3677037, 3758124, 3838940, 3919487, 3999767, 4079782, 4159533, 4239022,
    4318251, 4397221, 4475935, 4554393, 4632598, 4710551, 4788254, 4865708, 4942915, 5019877,
    5096595, 5173070, 5249304, 5325299, 5401057, 5476578, 5551863, 5626916, 5701736, 5776326,
    5850687, 5924820, 5998727, 6072408, 6145866, 6219102, 6292117, 6364912, 6437489, 6509849,
    6581994, 6653924, 6725640, 6797145, 6868440, 6939525, 7010401, 7081071, 7151535, 7221795,
    7291851, 7361705, 7431358, 7500811, 7570066, 7639123, 7707983, 7776648, 7845119, 7913396,
    7981482, 8049377, 8117081, 8184597, 8251925, 8319066, 8386022, 8452793, 8519380, 8585784,
    8652007, 8718049, 8783912, 8849595, 8915101, 8980430, 9045583, 9110562, 9175366, 9239997,
    9304456, 9368744, 9432862, 9496810, 9560590, 9624202, 9687648, 9750927, 9814042, 9876992,
    9939779, 10002404, 10064867, 10127169, 10189311, 10251295, 10313119, 10374787, 10436297, 10497652,
    10558851, 10619897, 10680788, 10741527, 10802114, 10862549, 10922834, 10982970, 11042956, 11102794,
    11162484, 11222027, 11281425, 11340677, 11399784, 11458747, 11517567, 11576245, 11634780, 11693174,
    11751428, 11809542, 11867516, 11925353, 11983051, 12040612, 12098036, 12155325, 12212478, 12269497,
    12326381, 12383133, 12439751, 12496238, 12552593, 12608817, 12664910, 12720874, 12776709, 12832415,
    12887994, 12943445, 12998769, 13053968, 13109040, 13163988, 13218811, 13273510, 13328086, 13382539,
    13436870, 13491079, 13545167, 13599135, 13652982, 13706710, 13760319, 13813810, 13867182, 13920437,
    13973575, 14026597, 14079503, 14132293, 14184969, 14237530, 14289977, 14342311, 14394532, 14446641,
    14498637, 14550522, 14602296, 14653960, 14705514, 14756958, 14808293, 14859519, 14910637, 14961647,
    15012550, 15063347, 15114037, 15164620, 15215099, 15265472, 15315741, 15365906, 15415967, 15465924,
    15515779, 15565531, 15615181, 15664729, 15714177, 15763523, 15812769, 15861915, 15910961, 15959909,
    16008757, 16057507, 16106159, 16154714, 16203171, 16251532, 16299796, 16347964, 16396036, 16444013,
    16491895, 16539683, 16587376, 16634976, 16682482, 16729895, 16777216
};

uint32_t firn_split_log2(uint32_t n)
{
    unsigned exponent = 0;
    uint32_t part, step;

    for (unsigned shift = 16; shift > 0; shift /= 2)
        if (n >> exponent >> shift != 0)
            exponent += shift;
    part = (uint32_t)(((uint64_t)n << 32 >> exponent) & UINT32_MAX);        /* the part after the leading 1 */
    step = log_table[(part >> 24) + 1] - log_table[part >> 24];
    return ((uint32_t)exponent << LOG_BITS) + log_table[part >> 24] +
           (uint32_t)((uint64_t)step * (part & 0xFFFFFF) >> 24);
}

uint64_t firn_split_entropy_bits(const uint32_t counts[256])
{
    uint64_t parts = 0, whole;
    uint32_t total = 0;

    for (size_t s = 0; s < 256; s++)
        if (counts[s] != 0) {
            parts += (uint64_t)counts[s] * (firn_split_log2(counts[s]) + LOG_SLACK);
            total += counts[s];
        }
    whole = total == 0 ? 0 : (uint64_t)total * firn_split_log2(total);
    return whole < parts ? 0 : (whole - parts) >> LOG_BITS;
}

/* The bytes of cells i .. j - 1, counted; returns how many different ones. */
static unsigned counts_between(const struct firn_split_work *w, size_t i, size_t j, uint32_t counts[256])
{
    unsigned different = 0;

    for (size_t s = 0; s < 256; s++) {
        counts[s] = w->before[j][s] - w->before[i][s];
        different += counts[s] != 0;
    }
    return different;
}

struct price {
    uint64_t bits, words;              /* words: of an optimal code, 0 when there is but one symbol */
    enum firn_segment_method method;
};

static struct price price(struct firn_split_work *w, size_t i, size_t j, size_t raw_bytes)
{
    struct price p = { SOLID_FRAMING_BITS + 8 * (uint64_t)raw_bytes, 0, FIRN_SEGMENT_STORED };
    uint8_t lengths[256];
    uint32_t counts[256];
    uint64_t bits;

    w->priced++;
    if (counts_between(w, i, j, counts) == 1) {
        if (raw_bytes > 1) {
            p.bits = SOLID_FRAMING_BITS + 8;
            p.method = FIRN_SEGMENT_RUN;
        }
        return p;
    }
    firn_prefix_lengths(counts, 256, FIRN_TABLE_LENGTH_LIMIT, lengths, w->prefix_work);
    p.words = firn_prefix_cost_bits(counts, lengths, 256);
    bits = PREFIX_FRAMING_BITS + p.words + firn_table_cost_bits(lengths);
    if (bits < p.bits) {
        p.bits = bits;
        p.method = FIRN_SEGMENT_PREFIX;
    }
    return p;
}

/* Prices stretch i .. j and keeps it if it is the best end at j so far; of equal ones the one that starts first. */
static void consider(struct firn_split_work *w, size_t i, size_t j, size_t raw_bytes)
{
    struct price p = price(w, i, j, raw_bytes);
    uint64_t bits = w->best[i] + p.bits;

    w->floor[i] = p.words;
    w->hope[i] = UINT64_MAX;           /* done */
    if (bits < w->best[j] || (bits == w->best[j] && i < w->from[j])) {
        w->best[j] = bits;
        w->from[j] = (uint16_t)i;
        w->method[j] = (uint8_t)p.method;
    }
}

/* No stretch of these words and bytes is cheaper. */
static uint64_t least_price(uint64_t words, size_t raw_bytes)
{
    uint64_t prefix = PREFIX_FRAMING_BITS + FIRN_TABLE_COST_MIN_BITS + words;
    uint64_t stored = SOLID_FRAMING_BITS + 8 * (uint64_t)raw_bytes;

    return prefix < stored ? prefix : stored;
}

/* The best last stretch of what lies before place j, by bounds. bytes_from(i) is i .. j. */
static void search(struct firn_split_work *w, size_t j, size_t end, size_t cell_bytes)
{
    size_t likely = j > 1 ? w->from[j - 1] : 0;
    uint64_t cell_words;
    uint32_t counts[256];

    consider(w, j - 1, j, end - (j - 1) * cell_bytes);
    cell_words = w->floor[j - 1];
    if (likely != j - 1)
        consider(w, likely, j, end - likely * cell_bytes);
    for (size_t i = 0; i + 1 < j; i++) {
        if (i == likely)
            continue;
        w->floor[i] += cell_words;
        w->hope[i] = w->best[i] + least_price(w->floor[i], end - i * cell_bytes);
        if (w->hope[i] <= w->best[j]) {
            uint64_t entropy;

            if (counts_between(w, i, j, counts) == 1) {
                consider(w, i, j, end - i * cell_bytes);
                continue;
            }
            entropy = firn_split_entropy_bits(counts);
            w->floor[i] = entropy > w->floor[i] ? entropy : w->floor[i];
            w->hope[i] = w->best[i] + least_price(w->floor[i], end - i * cell_bytes);
        }
    }
    for (;;) {
        size_t next = 0;

        for (size_t i = 1; i < j; i++)
            next = w->hope[i] < w->hope[next] ? i : next;
        if (w->hope[next] > w->best[j])
            return;
        consider(w, next, j, end - next * cell_bytes);
    }
}

static void follow(struct firn_split_work *w, size_t cells, size_t raw_bytes, size_t cell_bytes)
{
    size_t at = FIRN_SPLIT_CELLS_MAX, place = cells;

    while (place > 0) {
        size_t start = w->from[place], end = place == cells ? raw_bytes : place * cell_bytes;

        w->stretches[--at] = (struct firn_split_stretch){ start * cell_bytes, end - start * cell_bytes,
                                                          (enum firn_segment_method)w->method[place] };
        place = start;
    }
    w->stretch_count = FIRN_SPLIT_CELLS_MAX - at;
    memmove(w->stretches, w->stretches + at, w->stretch_count * sizeof *w->stretches);
}

void firn_split(const uint8_t *raw, size_t raw_bytes, size_t cell_bytes, bool prune, struct firn_split_work *work)
{
    size_t cells = (raw_bytes + cell_bytes - 1) / cell_bytes;

    work->priced = 0;
    work->best[0] = 0;
    memset(work->before[0], 0, sizeof work->before[0]);
    for (size_t j = 1; j <= cells; j++) {
        size_t start = (j - 1) * cell_bytes, end = j == cells ? raw_bytes : j * cell_bytes;

        firn_histogram_count(raw + start, end - start, work->before[j]);
        for (size_t s = 0; s < 256; s++)
            work->before[j][s] += work->before[j - 1][s];
        work->best[j] = UINT64_MAX;
        work->from[j] = 0;
        if (prune)
            search(work, j, end, cell_bytes);
        else
            for (size_t i = 0; i < j; i++)
                consider(work, i, j, end - i * cell_bytes);
    }
    work->cost_bits = work->best[cells];
    follow(work, cells, raw_bytes, cell_bytes);
}
