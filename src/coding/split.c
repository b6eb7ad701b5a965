/*
 * coding/split.c - the search for the cheapest cuts
 *
 * best[j] = min over i < j of best[i] + price(i, j). Pricing a stretch exactly takes an optimal code, so candidates are
 * looked at in the order of a lower bound, and the search for a j ends when no bound is below the best price found: the
 * result is the same as without bounds. There are two for the words of stretch i .. j: they take no fewer bits than
 * those of i .. j - 1 and of the last cell under codes of their own, and no fewer than firn_split_floor_bits says.
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
    RUN_BITS = SOLID_FRAMING_BITS + 8,
    PREFIX_FRAMING_BITS = 8 * 12 + 24, /* also six stream lengths, and half a byte for the end of each */
    LIMIT = FIRN_TABLE_LENGTH_LIMIT,
    FULL = 1 << LIMIT,
    FLOOR_TRIES = 3
};

/*
 * For one price: the sum of count * length, and in *filled that of 2^(LIMIT - length), when every symbol takes the
 * length from 1 to LIMIT that makes count * length + price * 2^-length least for itself: one bit more as long as it
 * is worth more than it costs, count <= price / 2^(length + 1).
 */
static uint32_t choose_freely(const uint32_t counts[256], uint32_t price, uint32_t *filled)
{
    uint32_t bits = 0, full = 0;

    for (size_t s = 0; s < 256; s++) {             /* no branches and no tables: compilers make vectors of it */
        int32_t count = (int32_t)counts[s];
        uint32_t own_bits = LIMIT * (uint32_t)count, own_full = count > 0;

        for (unsigned length = 1; length < LIMIT; length++) {
            uint32_t stays = count > (int32_t)(price >> (length + 1)) ? UINT32_MAX : 0;

            own_bits -= stays & (uint32_t)count;
            own_full += stays & 1u << (LIMIT - 1 - length);
        }
        bits += own_bits;
        full += own_full;
    }
    *filled = full;
    return bits;
}

/*
 * J. L. Lagrange's way with a side condition: the lengths of a code meet Kraft's inequality, sum of 2^-length <= 1,
 * so for any price >= 0 its bits are no fewer than sum of count * length + price * (sum of 2^-length - 1), and so no
 * fewer than the least this can be for freely chosen lengths. The best price makes the free lengths fill a code about
 * exactly; it lies between one and two times the number of bytes, nearly always, and goes with what the lengths fill.
 */
uint64_t firn_split_floor_bits(const uint32_t counts[256], uint64_t enough)
{
    uint64_t total = 0, price, most = 0;

    for (size_t s = 0; s < 256; s++)
        total += counts[s];
    price = total + total * 7 / 16;
    for (unsigned try = 0; try < FLOOR_TRIES && most < enough; try++) {
        uint32_t filled, bits = choose_freely(counts, (uint32_t)price, &filled);
        int64_t sum = ((int64_t)bits << LIMIT) + (int64_t)price * ((int64_t)filled - FULL);
        uint64_t floor = sum < 0 ? 0 : ((uint64_t)sum + FULL - 1) >> LIMIT;

        most = floor > most ? floor : most;
        price = price * filled / FULL;
    }
    return most;
}

unsigned firn_split_counts(const struct firn_split_work *work, size_t first, size_t end, uint32_t counts[256])
{
    unsigned different = 0;

    for (size_t s = 0; s < 256; s++) {
        counts[s] = work->before[end][s] - work->before[first][s];
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
    if (firn_split_counts(w, i, j, counts) == 1) {
        if (raw_bytes > 1) {
            p.bits = RUN_BITS;
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

/* No stretch of so many bytes whose words take so many bits at least is cheaper; only a run may take none. */
static uint64_t least_price(uint64_t words, size_t raw_bytes)
{
    if (words == 0)
        return RUN_BITS;
    words += PREFIX_FRAMING_BITS + FIRN_TABLE_COST_MIN_BITS;
    return words < SOLID_FRAMING_BITS + 8 * (uint64_t)raw_bytes ? words : SOLID_FRAMING_BITS + 8 * (uint64_t)raw_bytes;
}

/* What a last stretch i .. j may cost in all, at the least; a stretch of one symbol is priced at once. */
static void hope_for(struct firn_split_work *w, size_t i, size_t j, size_t raw_bytes)
{
    uint32_t counts[256];
    uint64_t floor;

    w->hope[i] = w->best[i] + least_price(w->floor[i], raw_bytes);
    if (w->hope[i] > w->best[j])
        return;
    if (firn_split_counts(w, i, j, counts) == 1) {
        consider(w, i, j, raw_bytes);
        return;
    }
    floor = firn_split_floor_bits(counts, w->best[j] - w->best[i]);
    w->floor[i] = floor > w->floor[i] ? floor : w->floor[i];
    w->hope[i] = w->best[i] + least_price(w->floor[i], raw_bytes);
}

/* The best last stretch of what lies before place j, which is at byte `end`. */
static void search(struct firn_split_work *w, size_t j, size_t end, size_t cell_bytes)
{
    size_t likely = j > 1 ? w->from[j - 1] : 0;        /* the stretch before goes on */
    uint64_t cell_words;

    w->floor[j - 1] = 0;
    hope_for(w, j - 1, j, end - (j - 1) * cell_bytes);
    cell_words = w->floor[j - 1];
    if (j > 1)
        consider(w, likely, j, end - likely * cell_bytes);
    for (size_t i = 0; i + 1 < j; i++) {
        if (i == likely)
            continue;
        w->floor[i] += cell_words;
        hope_for(w, i, j, end - i * cell_bytes);
    }
    for (;;) {
        size_t next = 0;

        for (size_t i = 1; i < j; i++)
            next = w->hope[i] < w->hope[next] ? i : next;
        if (w->hope[next] > w->best[j] || w->hope[next] == UINT64_MAX)
            return;
        consider(w, next, j, end - next * cell_bytes);
    }
}

static void follow(struct firn_split_work *w, size_t cells, size_t raw_bytes, size_t cell_bytes)
{
    size_t at = FIRN_SPLIT_CELLS_MAX, place = cells;

    while (place > 0) {
        size_t start = w->from[place], end = place == cells ? raw_bytes : place * cell_bytes;

        w->stretches[--at] = (struct firn_split_stretch){ start * cell_bytes, end - start * cell_bytes, start, place,
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
