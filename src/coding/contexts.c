/*
 * coding/contexts.c - clustering contexts, and the map written and read
 * SPDX-License-Identifier: BSD-2-Clause
 */
#include "coding/contexts.h"

#include "firn/prefix.h"

#include <string.h>

enum {
    SAME = FIRN_CONTEXTS_TABLES_MAX,   /* token of the map: the table before, once more and n times */
    MAP_TOKENS = FIRN_CONTEXTS_TABLES_MAX + 1,
    MAP_TOKEN_LIMIT = 7,
    ROUNDS = 4,
    ABSENT_BITS = 12,
    TABLE_BITS = 60,                   /* a table is guessed to cost so much, and for each symbol */
    TABLE_SYMBOL_BITS = 6
};

/* ---- clustering ---- */

static uint64_t price_of(const struct firn_contexts_work *w, size_t context, const uint16_t *costs)
{
    uint64_t sum = 0;

    for (uint32_t p = w->starts[context]; p < w->starts[context + 1]; p++)
        sum += (uint64_t)w->pairs[p].count * costs[w->pairs[p].symbol];
    return sum;
}

/* Eight counts at once: most contexts have few symbols. */
static inline bool are_absent(const uint32_t counts[8])
{
    uint32_t any = 0;

    for (size_t k = 0; k < 8; k++)
        any |= counts[k];
    return any == 0;
}

static void gather(const uint32_t *counts, size_t contexts, size_t symbols, struct firn_contexts_work *w)
{
    uint32_t made = 0;

    memset(w->sums[0], 0, sizeof w->sums[0]);
    for (size_t c = 0; c < contexts; c++) {
        const uint32_t *row = counts + c * symbols;

        w->starts[c] = made;
        for (size_t s = 0; s < symbols; s++) {
            if (s + 8 <= symbols && are_absent(row + s)) {
                s += 7;
                continue;
            }
            if (row[s] != 0) {
                w->pairs[made++] = (struct firn_contexts_pair){ row[s], (uint16_t)s };
                w->sums[0][s] += row[s];
            }
        }
    }
    w->starts[contexts] = made;
}

/* A symbol that a table does not have would be a rare one in it, however few symbols the table is made from. */
static void price_table(const struct firn_cost_logs *logs, struct firn_contexts_work *w, unsigned t, size_t symbols)
{
    firn_cost_symbols(logs, w->sums[t], symbols, w->costs[t]);
    for (size_t s = 0; s < symbols; s++)
        if (w->sums[t][s] == 0 && w->costs[t][s] < ABSENT_BITS * FIRN_COST_BIT)
            w->costs[t][s] = ABSENT_BITS * FIRN_COST_BIT;
}

/* What the context would cost under a code of its own, tables left out. */
static uint64_t own_price(const struct firn_cost_logs *logs, const struct firn_contexts_work *w, size_t context)
{
    uint32_t total = 0, all;
    uint64_t sum = 0;

    for (uint32_t p = w->starts[context]; p < w->starts[context + 1]; p++)
        total += w->pairs[p].count;
    if (total == 0)
        return 0;
    all = firn_cost_log(logs, total);
    for (uint32_t p = w->starts[context]; p < w->starts[context + 1]; p++) {
        uint32_t cost = all - firn_cost_log(logs, w->pairs[p].count);

        sum += (uint64_t)w->pairs[p].count * (cost < FIRN_COST_BIT ? FIRN_COST_BIT : cost);
    }
    return sum;
}

/* Further tables start from the context that is served worst; returns how many there are. */
static unsigned seed(const struct firn_cost_logs *logs, size_t contexts, size_t symbols, unsigned tables_max,
                     struct firn_contexts *made, struct firn_contexts_work *w)
{
    uint64_t own[FIRN_CONTEXTS_MAX];
    unsigned tables = 1;

    price_table(logs, w, 0, symbols);
    for (size_t c = 0; c < contexts; c++) {
        own[c] = own_price(logs, w, c);
        w->price[c] = price_of(w, c, w->costs[0]);
        made->map[c] = 0;
    }
    for (; tables < tables_max; tables++) {
        uint64_t worst = (uint64_t)FIRN_COST_BIT * TABLE_BITS;
        size_t from = SIZE_MAX;

        for (size_t c = 0; c < contexts; c++)
            if (w->price[c] > own[c] + worst) {
                worst = w->price[c] - own[c];
                from = c;
            }
        if (from == SIZE_MAX)
            break;
        memset(w->sums[tables], 0, sizeof w->sums[tables]);
        for (uint32_t p = w->starts[from]; p < w->starts[from + 1]; p++)
            w->sums[tables][w->pairs[p].symbol] = w->pairs[p].count;
        price_table(logs, w, tables, symbols);
        for (size_t c = 0; c < contexts; c++) {
            uint64_t price = price_of(w, c, w->costs[tables]);

            if (price < w->price[c]) {
                w->price[c] = price;
                made->map[c] = (uint8_t)tables;
            }
        }
    }
    return tables;
}

static void sum_up(size_t contexts, unsigned tables, const struct firn_contexts *made, struct firn_contexts_work *w)
{
    memset(w->sums, 0, tables * sizeof w->sums[0]);
    for (size_t c = 0; c < contexts; c++)
        for (uint32_t p = w->starts[c]; p < w->starts[c + 1]; p++)
            w->sums[made->map[c]][w->pairs[p].symbol] += w->pairs[p].count;
}

/* Every context to the table that is cheapest for it. */
static void assign(size_t contexts, unsigned tables, struct firn_contexts *made, struct firn_contexts_work *w)
{
    for (size_t c = 0; c < contexts; c++) {
        w->price[c] = UINT64_MAX;
        for (unsigned t = 0; t < tables; t++) {
            uint64_t price = price_of(w, c, w->costs[t]);

            if (price < w->price[c]) {
                w->price[c] = price;
                made->map[c] = (uint8_t)t;
            }
        }
    }
}

/* What the counts of a (and b, if not NULL) cost under one code, the table included. */
static uint64_t sum_price(const struct firn_cost_logs *logs, const uint32_t *a, const uint32_t *b, size_t symbols)
{
    uint32_t total = 0, all;
    uint64_t sum = (uint64_t)TABLE_BITS * FIRN_COST_BIT;

    for (size_t s = 0; s < symbols; s++)
        total += a[s] + (b == NULL ? 0 : b[s]);
    if (total == 0)
        return 0;
    all = firn_cost_log(logs, total);
    for (size_t s = 0; s < symbols; s++) {
        uint32_t count = a[s] + (b == NULL ? 0 : b[s]), cost;

        if (count == 0)
            continue;
        cost = all - firn_cost_log(logs, count);
        sum += (uint64_t)count * (cost < FIRN_COST_BIT ? FIRN_COST_BIT : cost) + TABLE_SYMBOL_BITS * FIRN_COST_BIT;
    }
    return sum;
}

struct joining {
    uint64_t alone[FIRN_CONTEXTS_TABLES_MAX], together[FIRN_CONTEXTS_TABLES_MAX][FIRN_CONTEXTS_TABLES_MAX];
    uint8_t into[FIRN_CONTEXTS_TABLES_MAX];        /* where a table went */
    bool gone[FIRN_CONTEXTS_TABLES_MAX];
};

/* The pair whose joining saves most; false when none saves anything. */
static bool best_pair(const struct joining *j, unsigned tables, unsigned *a, unsigned *b)
{
    uint64_t saved = 0;

    for (unsigned x = 0; x < tables; x++)
        for (unsigned y = x + 1; y < tables && !j->gone[x]; y++)
            if (!j->gone[y] && j->alone[x] + j->alone[y] > j->together[x][y] + saved) {
                saved = j->alone[x] + j->alone[y] - j->together[x][y];
                *a = x;
                *b = y;
            }
    return saved > 0;
}

/* Joins tables as long as that saves bits; returns how many are left. */
static unsigned join(const struct firn_cost_logs *logs, size_t contexts, size_t symbols, unsigned tables,
                     struct firn_contexts *made, struct firn_contexts_work *w)
{
    struct joining j;
    unsigned a = 0, b = 0, left = 0;

    memset(&j, 0, sizeof j);
    for (unsigned x = 0; x < tables; x++) {
        j.into[x] = (uint8_t)x;
        j.alone[x] = sum_price(logs, w->sums[x], NULL, symbols);
        for (unsigned y = 0; y < x; y++)
            j.together[y][x] = sum_price(logs, w->sums[y], w->sums[x], symbols);
        j.gone[x] = x > 0 && j.alone[x] == 0;
    }
    while (best_pair(&j, tables, &a, &b)) {
        for (size_t s = 0; s < symbols; s++)
            w->sums[a][s] += w->sums[b][s];
        j.gone[b] = true;
        j.alone[a] = j.together[a][b];
        for (unsigned x = 0; x < tables; x++)
            j.into[x] = j.into[x] == b ? (uint8_t)a : j.into[x];
        for (unsigned x = 0; x < tables; x++)
            if (x != a && !j.gone[x])
                j.together[x < a ? x : a][x < a ? a : x] = sum_price(logs, w->sums[a], w->sums[x], symbols);
    }
    for (unsigned x = 0; x < tables; x++) {        /* numbers without gaps; the lowest of those joined stays */
        if (j.gone[x])
            continue;
        for (unsigned y = 0; y < tables; y++)
            j.into[y] = j.into[y] == x ? (uint8_t)left : j.into[y];
        memmove(w->sums[left++], w->sums[x], sizeof w->sums[x]);
    }
    for (size_t c = 0; c < contexts; c++)
        made->map[c] = j.into[made->map[c]];
    return left;
}

/* A code has two symbols at least. */
static void make_codes(size_t symbols, unsigned limit, struct firn_contexts *made, struct firn_contexts_work *w)
{
    for (unsigned t = 0; t < made->tables; t++) {
        size_t used = 0;

        for (size_t s = 0; s < symbols; s++)
            used += w->sums[t][s] != 0;
        for (size_t s = 0; used < 2; s++)
            if (w->sums[t][s] == 0) {
                w->sums[t][s] = 1;
                used++;
            }
        firn_prefix_lengths(w->sums[t], symbols, limit, made->lengths[t], w->prefix_work);
        for (size_t s = 0; s < symbols; s++)
            w->costs[t][s] = made->lengths[t][s] == 0 ? UINT16_MAX : (uint16_t)(made->lengths[t][s] * FIRN_COST_BIT);
    }
}

/* Contexts that do not occur continue the run before them; tables are numbered as the map meets them. */
static void tidy(size_t contexts, struct firn_contexts *made, struct firn_contexts_work *w)
{
    uint8_t number[FIRN_CONTEXTS_TABLES_MAX], last = 0;
    unsigned known = 0;

    memset(number, UINT8_MAX, sizeof number);
    for (size_t c = 0; c < contexts; c++)
        if (w->starts[c] != w->starts[c + 1]) {
            last = made->map[c];
            break;
        }
    for (size_t c = 0; c < contexts; c++) {
        last = w->starts[c] == w->starts[c + 1] ? last : made->map[c];
        if (number[last] == UINT8_MAX)
            number[last] = (uint8_t)known++;
        made->map[c] = number[last];
    }
    made->tables = known;
    sum_up(contexts, known, made, w);
}

static unsigned map_cost_bits(const struct firn_contexts *codes, size_t contexts);

static unsigned tables_cost_bits(const struct firn_contexts *codes, size_t symbols)
{
    return firn_table_cost_bits_all(codes->lengths[0], FIRN_CONTEXTS_ALPHABET_MAX, codes->tables, symbols);
}

uint64_t firn_contexts_make(const struct firn_cost_logs *logs, const uint32_t *counts, size_t contexts, size_t symbols,
                            unsigned tables_max, unsigned limit, struct firn_contexts *made,
                            struct firn_contexts_work *work)
{
    uint64_t bits = 0;
    unsigned tables;

    gather(counts, contexts, symbols, work);
    tables = seed(logs, contexts, symbols, tables_max, made, work);
    for (unsigned round = 0; round < ROUNDS && tables > 1; round++) {
        sum_up(contexts, tables, made, work);
        if (round + 1 == ROUNDS)
            tables = join(logs, contexts, symbols, tables, made, work);
        for (unsigned t = 0; t < tables; t++)
            price_table(logs, work, t, symbols);
        assign(contexts, tables, made, work);
    }
    tidy(contexts, made, work);
    make_codes(symbols, limit, made, work);
    if (made->tables > 1) {            /* once more with the words' real lengths */
        assign(contexts, made->tables, made, work);
        tidy(contexts, made, work);
        make_codes(symbols, limit, made, work);
    }
    for (unsigned t = 0; t < made->tables; t++)
        bits += firn_prefix_cost_bits(work->sums[t], made->lengths[t], symbols);
    return bits + tables_cost_bits(made, symbols) + map_cost_bits(made, contexts);
}

uint64_t firn_contexts_make_one(const uint32_t *counts, size_t contexts, size_t symbols, unsigned limit,
                                struct firn_contexts *made, struct firn_contexts_work *work)
{
    memcpy(work->sums[0], counts, symbols * sizeof *counts);
    memset(made->map, 0, contexts);
    made->tables = 1;
    make_codes(symbols, limit, made, work);
    return tables_cost_bits(made, symbols) +
           firn_prefix_cost_bits(work->sums[0], made->lengths[0], symbols) + map_cost_bits(made, contexts);
}

/* ---- the map written down ---- */

struct map_token {
    uint16_t kind, more;               /* more: of SAME */
};

static size_t map_tokens(const struct firn_contexts *codes, size_t contexts, struct map_token *tokens)
{
    size_t made = 0;

    for (size_t c = 0; c < contexts;) {
        size_t same = 1;

        while (c + same < contexts && codes->map[c + same] == codes->map[c])
            same++;
        tokens[made++] = (struct map_token){ codes->map[c], 0 };
        if (same > 1)
            tokens[made++] = (struct map_token){ SAME, (uint16_t)(same - 1) };
        c += same;
    }
    return made;
}

static void plan_map(const struct map_token *tokens, size_t count, uint8_t lengths[MAP_TOKENS])
{
    uint32_t weights[MAP_TOKENS] = { 0 };
    uint64_t work[512];                /* firn_prefix_work_bytes(17) is well below: the test of this file checks it */

    for (size_t i = 0; i < count; i++)
        weights[tokens[i].kind]++;
    firn_prefix_lengths(weights, MAP_TOKENS, MAP_TOKEN_LIMIT, lengths, work);
}

static unsigned gamma_bits(unsigned v)
{
    unsigned bits = 1;

    for (; v > 1; v >>= 1)
        bits += 2;
    return bits;
}

static unsigned map_cost_bits(const struct firn_contexts *codes, size_t contexts)
{
    struct map_token tokens[2 * FIRN_CONTEXTS_MAX];
    uint8_t lengths[MAP_TOKENS];
    size_t count;
    unsigned bits = 4;

    if (codes->tables == 1)
        return bits;
    count = map_tokens(codes, contexts, tokens);
    plan_map(tokens, count, lengths);
    bits += 3 * (codes->tables + 1);
    for (size_t i = 0; i < count; i++)
        bits += lengths[tokens[i].kind] + (tokens[i].kind == SAME ? gamma_bits(tokens[i].more) : 0);
    return bits;
}

static void write_map(struct firn_bits_writer *writer, const struct firn_contexts *codes, size_t contexts)
{
    struct map_token tokens[2 * FIRN_CONTEXTS_MAX];
    uint8_t lengths[MAP_TOKENS];
    uint16_t words[MAP_TOKENS];
    size_t count = map_tokens(codes, contexts, tokens);

    plan_map(tokens, count, lengths);
    firn_prefix_assign(lengths, MAP_TOKENS, words);
    for (unsigned t = 0; t < codes->tables; t++)
        firn_bits_put(writer, lengths[t], 3);
    firn_bits_put(writer, lengths[SAME], 3);
    for (size_t i = 0; i < count; i++) {
        firn_bits_put(writer, words[tokens[i].kind], lengths[tokens[i].kind]);
        if (tokens[i].kind == SAME) {
            unsigned bits = gamma_bits(tokens[i].more);

            firn_bits_put(writer, 0, bits / 2);
            firn_bits_put(writer, tokens[i].more, bits / 2 + 1);
        }
    }
}

void firn_contexts_write(struct firn_bits_writer *writer, const struct firn_contexts *codes, size_t contexts,
                         size_t symbols)
{
    firn_bits_put(writer, codes->tables - 1, 4);
    if (codes->tables > 1)
        write_map(writer, codes, contexts);
    firn_table_write_all(writer, codes->lengths[0], FIRN_CONTEXTS_ALPHABET_MAX, codes->tables, symbols);
}

static enum firn_status read_map(struct firn_bits_reader *reader, struct firn_contexts *codes, size_t contexts)
{
    uint8_t lengths[MAP_TOKENS] = { 0 }, decode[1 << MAP_TOKEN_LIMIT];
    uint16_t words[MAP_TOKENS];
    size_t c = 0;

    for (unsigned t = 0; t < codes->tables; t++)
        lengths[t] = (uint8_t)firn_bits_take(reader, 3);
    lengths[SAME] = (uint8_t)firn_bits_take(reader, 3);
    if (firn_prefix_assign(lengths, MAP_TOKENS, words) != FIRN_OK)
        return FIRN_BAD_DATA;
    memset(decode, UINT8_MAX, sizeof decode);
    for (unsigned t = 0; t < MAP_TOKENS; t++) {
        size_t span = lengths[t] == 0 ? 0 : (size_t)1 << (MAP_TOKEN_LIMIT - lengths[t]);

        memset(decode + words[t] * span, (int)t, span);
    }
    while (c < contexts) {
        unsigned token = decode[firn_bits_peek16(reader) >> (16 - MAP_TOKEN_LIMIT)], zeros = 0;
        size_t more;

        if (token == UINT8_MAX)
            return FIRN_BAD_DATA;
        reader->at_bits += lengths[token];
        if (token != SAME) {
            codes->map[c++] = (uint8_t)token;
            continue;
        }
        while (zeros < 10 && firn_bits_take(reader, 1) == 0)
            zeros++;
        more = (size_t)1 << zeros | firn_bits_take(reader, zeros);
        if (zeros == 10 || c == 0 || more > contexts - c)
            return FIRN_BAD_DATA;
        memset(codes->map + c, codes->map[c - 1], more);
        c += more;
    }
    return FIRN_OK;
}

enum firn_status firn_contexts_read(struct firn_bits_reader *reader, struct firn_contexts *codes, size_t contexts,
                                    size_t symbols)
{
    codes->tables = firn_bits_take(reader, 4) + 1;
    memset(codes->map, 0, contexts);
    if (codes->tables > 1 && read_map(reader, codes, contexts) != FIRN_OK)
        return FIRN_BAD_DATA;
    return firn_table_read_all(reader, codes->lengths[0], FIRN_CONTEXTS_ALPHABET_MAX, codes->tables, symbols);
}
