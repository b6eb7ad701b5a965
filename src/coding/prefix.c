/*
 * coding/prefix.c - code lengths by package-merge, words by the canonical rule
 *
 * Why the least variance comes out. Write the cost of a symbol of weight w at length l as the pair (w l, w l^2), compared
 * in that order: the second number decides between codes of equal cost, and for equal cost the variance is least when it
 * is. The coin of a symbol at depth d then costs (w, w (2d - 1)), which grows with d, so package-merge finds the least
 * sum of pairs. A package that weighs as much as a coin of depth d is made of coins deeper than d, so its second number
 * is greater: taking the coin first on equal weights IS the order of the pairs, and packages made in that order stay in
 * it. So the second number never has to be computed.
 *
 * Without a limit the same rule is Huffman's own algorithm with two queues, leaf before node on equal weights. Its code has
 * the least greatest length of all optimal codes (E. S. Schwartz, Information and Control 7, 1964, pp. 37-44), so it is
 * kept when it meets the limit; when it does not, no optimal code does, and package-merge finds the best that does.
 *
 * SPDX-License-Identifier: BSD-2-Clause
 */
#include "firn/prefix.h"

#include <stdbool.h>
#include <string.h>

enum { SYMBOL_BITS = 10, DIGIT_BITS = 8, DIGITS = 1 << DIGIT_BITS };

/* The lent work space, cut up. All arrays hold used + 1 or 2 * used + 1 elements: one for a sentinel. */
struct bench {
    uint64_t *keys, *spare;            /* weight << SYMBOL_BITS | symbol */
    uint64_t *leaves;                  /* weights in ascending order */
    uint64_t *merged, *previous;       /* the list of one level and of the level below it; or the nodes of the tree */
    uint8_t *is_leaf;                  /* per level, 2 * symbols flags; or the parents of the nodes */
};

size_t firn_prefix_work_bytes(size_t symbols)
{
    return sizeof(uint64_t) * (3 * (symbols + 1) + 2 * (2 * symbols + 2)) + FIRN_PREFIX_LENGTH_MAX * 2 * symbols + 8;
}

static struct bench cut(void *work, size_t symbols)
{
    struct bench b;

    b.keys = work;
    b.spare = b.keys + symbols + 1;
    b.leaves = b.spare + symbols + 1;
    b.merged = b.leaves + symbols + 1;
    b.previous = b.merged + 2 * symbols + 2;
    b.is_leaf = (uint8_t *)(b.previous + 2 * symbols + 2);
    return b;
}

/* Stable, by weight; equal weights stay in symbol order. Returns where the sorted keys are. */
static uint64_t *sort(uint64_t *keys, uint64_t *spare, size_t count, uint32_t greatest)
{
    for (unsigned shift = SYMBOL_BITS; shift < SYMBOL_BITS + 32 && (uint64_t)greatest >> (shift - SYMBOL_BITS) != 0;
         shift += DIGIT_BITS) {
        uint16_t starts[DIGITS] = { 0 };
        unsigned start = 0;
        uint64_t *other = spare;

        for (size_t i = 0; i < count; i++)
            starts[keys[i] >> shift & (DIGITS - 1)]++;
        for (size_t d = 0; d < DIGITS; d++) {
            unsigned here = starts[d];

            starts[d] = (uint16_t)start;
            start += here;
        }
        for (size_t i = 0; i < count; i++)
            spare[starts[keys[i] >> shift & (DIGITS - 1)]++] = keys[i];
        spare = keys;
        keys = other;
    }
    return keys;
}

/*
 * Huffman's algorithm on sorted leaves. how_many[d] becomes the number of symbols of length d; false when a length would
 * pass the limit. `used` is at least 2.
 */
static bool huffman(const struct bench *b, size_t used, unsigned limit, uint16_t *how_many)
{
    uint64_t *nodes = b->merged;
    uint16_t *parents = (uint16_t *)b->previous;
    uint8_t *depths = b->is_leaf;
    size_t leaf = 0, node = 0;
    unsigned inner[FIRN_PREFIX_LENGTH_MAX + 1] = { 0 };

    for (size_t made = 0; made < used - 1; made++) {
        uint64_t sum = 0;

        nodes[made] = UINT64_MAX;
        for (unsigned k = 0; k < 2; k++) {
            bool take_leaf = b->leaves[leaf] <= nodes[node];

            sum += take_leaf ? b->leaves[leaf] : nodes[node];
            parents[node] = (uint16_t)made;         /* the last one written before node moves on is the right one */
            leaf += take_leaf;
            node += !take_leaf;
        }
        nodes[made] = sum;
    }
    depths[used - 2] = 0;
    inner[0] = 1;
    for (size_t i = used - 2; i-- > 0;) {
        unsigned depth = depths[parents[i]] + 1u;

        if (depth >= limit)
            return false;
        depths[i] = (uint8_t)depth;
        inner[depth]++;
    }
    for (unsigned d = 1; d <= limit; d++)
        how_many[d] = (uint16_t)(2 * inner[d - 1] - inner[d]);
    return true;
}

/*
 * Package-merge on sorted leaves. Level `limit` is the list of leaves alone; each level above merges the leaves with the
 * packages (pairs) of the level below. Of the topmost list the first 2 * used - 2 are taken, and so on down; a leaf
 * taken on a level makes its symbol one longer, and leaves are always taken from the light end.
 * how_many[d]: as above. 2 <= used <= 2^limit.
 */
static void package_merge(const struct bench *b, size_t used, unsigned limit, uint16_t *how_many)
{
    uint64_t *list = b->merged, *below = b->previous;
    size_t below_count = used, wanted = 2 * used - 2, deeper = 0;

    memcpy(below, b->leaves, used * sizeof *below);
    memset(b->is_leaf + (limit - 1) * 2 * used, 1, used);
    for (unsigned level = limit - 1; level > 0; level--) {
        uint8_t *flags = b->is_leaf + (level - 1) * 2 * used;
        size_t packages = below_count / 2, count = used + packages, leaf = 0, package = 0;
        uint64_t *swap = below;

        below[2 * packages] = UINT64_MAX / 2;       /* a sentinel pair, heavier than any leaf */
        below[2 * packages + 1] = UINT64_MAX / 2;
        for (size_t i = 0; i < count; i++) {
            uint64_t weight = below[2 * package] + below[2 * package + 1], own = b->leaves[leaf];
            bool take_leaf = own <= weight;

            list[i] = take_leaf ? own : weight;
            flags[i] = take_leaf;
            leaf += take_leaf;
            package += !take_leaf;
        }
        below_count = count;
        below = list;
        list = swap;
    }
    memset(how_many, 0, (limit + 1) * sizeof *how_many);
    for (unsigned level = 1; level <= limit; level++) {
        const uint8_t *flags = b->is_leaf + (level - 1) * 2 * used;
        size_t leaves = 0;

        for (size_t i = 0; i < wanted; i++)
            leaves += flags[i];
        if (level > 1)
            how_many[level - 1] = (uint16_t)(deeper - leaves);
        deeper = leaves;
        wanted = 2 * (wanted - leaves);
    }
    how_many[limit] = (uint16_t)deeper;
}

enum firn_status firn_prefix_lengths(const uint32_t *weights, size_t symbols, unsigned limit, uint8_t *lengths, void *work)
{
    uint16_t how_many[FIRN_PREFIX_LENGTH_MAX + 1] = { 0 };
    struct bench b;
    uint32_t greatest = 0;
    size_t used = 0, at = 0;

    if (symbols > FIRN_PREFIX_SYMBOLS_MAX || limit < 1 || limit > FIRN_PREFIX_LENGTH_MAX)
        return FIRN_BAD_ARGUMENT;
    b = cut(work, symbols);
    for (size_t s = 0; s < symbols; s++) {
        b.keys[used] = (uint64_t)weights[s] << SYMBOL_BITS | s;
        used += weights[s] != 0;
        greatest = weights[s] > greatest ? weights[s] : greatest;
    }
    if (used > (size_t)1 << limit)
        return FIRN_BAD_ARGUMENT;
    memset(lengths, 0, symbols);
    if (used < 2) {
        if (used == 1)
            lengths[b.keys[0] & ((1 << SYMBOL_BITS) - 1)] = 1;
        return FIRN_OK;
    }
    b.keys = sort(b.keys, b.spare, used, greatest);
    for (size_t i = 0; i < used; i++)
        b.leaves[i] = b.keys[i] >> SYMBOL_BITS;
    b.leaves[used] = UINT64_MAX;
    if (!huffman(&b, used, limit, how_many))
        package_merge(&b, used, limit, how_many);
    for (unsigned length = limit; length > 0; length--)
        for (unsigned k = how_many[length]; k > 0; k--)
            lengths[b.keys[at++] & ((1 << SYMBOL_BITS) - 1)] = (uint8_t)length;
    return FIRN_OK;
}

enum firn_status firn_prefix_assign(const uint8_t *lengths, size_t symbols, uint16_t *words)
{
    uint32_t how_many[FIRN_PREFIX_LENGTH_MAX + 1] = { 0 }, next[FIRN_PREFIX_LENGTH_MAX + 2] = { 0 };
    uint32_t filled = 0, used = 0;      /* of 2^15 */

    for (size_t s = 0; s < symbols; s++) {
        if (lengths[s] > FIRN_PREFIX_LENGTH_MAX)
            return FIRN_BAD_LENGTHS;
        how_many[lengths[s]]++;
    }
    for (unsigned l = 1; l <= FIRN_PREFIX_LENGTH_MAX; l++) {
        if (how_many[l] > UINT32_C(1) << l)         /* keeps the sum below from wrapping round */
            return FIRN_BAD_LENGTHS;
        next[l] = filled >> (FIRN_PREFIX_LENGTH_MAX - l);
        filled += how_many[l] << (FIRN_PREFIX_LENGTH_MAX - l);
        used += how_many[l];
    }
    if (filled != UINT32_C(1) << FIRN_PREFIX_LENGTH_MAX && !(used == 1 && how_many[1] == 1) && used != 0)
        return FIRN_BAD_LENGTHS;
    for (size_t s = 0; s < symbols; s++)
        words[s] = lengths[s] == 0 ? 0 : (uint16_t)next[lengths[s]]++;
    return FIRN_OK;
}

uint64_t firn_prefix_cost_bits(const uint32_t *weights, const uint8_t *lengths, size_t symbols)
{
    uint64_t bits = 0;

    for (size_t s = 0; s < symbols; s++)
        bits += (uint64_t)weights[s] * lengths[s];
    return bits;
}
