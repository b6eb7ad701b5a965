/*
 * coding/prefix.c - code lengths by package-merge, words by the canonical rule
 *
 * Why the least variance comes out. Write the cost of a symbol of weight w at length l as the pair (w l, w l^2),
 * compared in that order: the second number decides between codes of equal cost, and for equal cost the variance is
 * least when it is. The coin of a symbol at depth d then costs (w, w (2d - 1)), which grows with d, so package-merge
 * finds the least sum of pairs. A package that weighs as much as a coin of depth d is made of coins deeper than d, so
 * its second number is greater: taking the coin first on equal weights IS the order of the pairs, and packages made
 * in that order stay in it. So the second number never has to be computed.
 *
 * Without a limit the same rule is Huffman's own algorithm with two queues, leaf before node on equal weights. Its
 * code has the least greatest length of all optimal codes (E. S. Schwartz, Information and Control 7, 1964, pp.
 * 37-44), so it is kept when it meets the limit; when it does not, no optimal code does, and package-merge finds the
 * best that does.
 *
 * SPDX-License-Identifier: BSD-2-Clause
 */
#include "firn/prefix.h"

#include <stdbool.h>
#include <string.h>

enum { SYMBOL_BITS = 10, DIGIT_BITS = 8, DIGITS = 1 << DIGIT_BITS };

/* The lent work space, cut up for so many symbols. */
struct bench {
    uint64_t *keys, *spare;            /* weight << SYMBOL_BITS | symbol */
    uint64_t *leaves;                  /* weights in ascending order, a sentinel before and behind */
    uint64_t *packages;                /* of the level below, a sentinel before and behind; or the nodes of the tree */
    uint64_t *list;                    /* of one level */
    uint16_t *leaves_in;               /* a row of `stride` for each level; or parents and depths of the nodes */
    size_t stride;
};

size_t firn_prefix_work_bytes(size_t symbols)
{
    size_t n = symbols < 2 ? 2 : symbols;

    return sizeof(uint64_t) * (n + n + (n + 2) + (n + 2) + 2 * n) + sizeof(uint16_t) * FIRN_PREFIX_LENGTH_MAX * 2 * n;
}

static struct bench cut(void *work, size_t symbols)
{
    size_t n = symbols < 2 ? 2 : symbols;
    struct bench b;

    b.keys = work;
    b.spare = b.keys + n;
    b.leaves = b.spare + n + 1;
    b.packages = b.leaves + n + 2;
    b.list = b.packages + n + 1;
    b.leaves_in = (uint16_t *)(b.list + 2 * n);
    b.stride = 2 * n;
    *(b.leaves - 1) = 0;
    *(b.packages - 1) = 0;
    return b;
}

/* Stable, by weight. Returns where the sorted keys are. */
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
 * Huffman's algorithm on sorted leaves. how_many[d] becomes the number of symbols of length d; false when a length
 * would pass the limit. `used` is at least 2.
 */
static bool huffman(const struct bench *b, size_t used, unsigned limit, uint16_t *how_many)
{
    uint64_t *nodes = b->packages;
    uint16_t *parents = b->leaves_in, *depths = parents + used;
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
        depths[i] = (uint16_t)depth;
        inner[depth]++;
    }
    for (unsigned d = 1; d <= limit; d++)
        how_many[d] = (uint16_t)(2 * inner[d - 1] - inner[d]);
    return true;
}

/*
 * Merges the leaves with the packages of the level below, leaf before package on equal weights. leaves_in[i] becomes
 * the number of leaves among the first i of the list. Works from both ends at once, so that two chains of comparisons
 * are under way: the sentinels in front weigh 0 and those behind more than anything real, and 0 < every weight.
 */
static void merge(const uint64_t *leaves, size_t used, const uint64_t *packages, size_t package_count, uint64_t *list,
                  uint16_t *leaves_in)
{
    size_t low = 0, high = used + package_count, low_leaf = 0, high_leaf = used;

    leaves_in[high] = (uint16_t)used;
    while (low + 1 < high) {
        uint64_t low_own = leaves[low_leaf], low_package = packages[low - low_leaf];
        uint64_t high_own = *(leaves + high_leaf - 1), high_package = *(packages + (high - high_leaf) - 1);
        bool take_low = low_own <= low_package, take_high = high_own > high_package;

        leaves_in[low] = (uint16_t)low_leaf;
        list[low++] = take_low ? low_own : low_package;
        low_leaf += take_low;
        list[--high] = take_high ? high_own : high_package;
        high_leaf -= take_high;
        leaves_in[high] = (uint16_t)high_leaf;
    }
    if (low < high) {
        leaves_in[low] = (uint16_t)low_leaf;
        list[low] = low_leaf < high_leaf ? leaves[low_leaf] : packages[low - low_leaf];
    }
}

/*
 * Package-merge on sorted leaves. The list of level `limit` holds the leaves alone; each level above merges the
 * leaves with the packages (pairs) of the level below. Of the topmost list the first 2 * used - 2 are taken, all
 * leaves among them; of the level below twice as many as packages were taken, and so on; a leaf taken on a level
 * makes its symbol one longer, and leaves are always taken from the light end. So the topmost list need not be made.
 * how_many[d]: as above. 2 <= used <= 2^limit.
 */
static void package_merge(const struct bench *b, size_t used, unsigned limit, uint16_t *how_many)
{
    size_t count = used, wanted = 2 * (used - 2), deeper = used;

    memcpy(b->list, b->leaves, used * sizeof *b->list);
    for (size_t i = 0; i <= used; i++)
        b->leaves_in[(limit - 1) * b->stride + i] = (uint16_t)i;
    for (unsigned level = limit - 1; level > 1; level--) {
        size_t packages = count / 2;

        for (size_t k = 0; k < packages; k++)
            b->packages[k] = b->list[2 * k] + b->list[2 * k + 1];
        b->packages[packages] = UINT64_MAX - 1;
        merge(b->leaves, used, b->packages, packages, b->list, b->leaves_in + (level - 1) * b->stride);
        count = used + packages;
    }
    for (unsigned level = 2; level <= limit; level++) {
        size_t leaves = b->leaves_in[(level - 1) * b->stride + wanted];

        how_many[level - 1] = (uint16_t)(deeper - leaves);
        deeper = leaves;
        wanted = 2 * (wanted - leaves);
    }
    how_many[limit] = (uint16_t)deeper;
}

/*
 * Collects the symbols that occur and sorts them by weight into b->keys and b->leaves, of equal ones the last symbol
 * first, so that the first gets the shorter word; returns how many there are.
 */
static size_t gather(struct bench *b, const uint32_t *weights, size_t symbols, uint64_t *total)
{
    uint32_t greatest = 0;
    size_t used = 0;

    *total = 0;
    for (size_t s = symbols; s-- > 0;) {
        if (weights[s] == 0)
            continue;
        b->keys[used++] = (uint64_t)weights[s] << SYMBOL_BITS | s;
        *total += weights[s];
        greatest = weights[s] > greatest ? weights[s] : greatest;
    }
    b->keys = sort(b->keys, b->spare, used, greatest);
    for (size_t i = 0; i < used; i++)
        b->leaves[i] = b->keys[i] >> SYMBOL_BITS;
    b->leaves[used] = UINT64_MAX;
    return used;
}

enum firn_status firn_prefix_lengths(const uint32_t *weights, size_t symbols, unsigned limit, uint8_t *lengths,
                                     void *work)
{
    uint16_t how_many[FIRN_PREFIX_LENGTH_MAX + 1] = { 0 };
    struct bench b;
    uint64_t total;
    size_t used, at = 0;

    if (symbols > FIRN_PREFIX_SYMBOLS_MAX || limit < 1 || limit > FIRN_PREFIX_LENGTH_MAX)
        return FIRN_BAD_ARGUMENT;
    b = cut(work, symbols);
    used = gather(&b, weights, symbols, &total);
    if (used > (size_t)1 << limit)
        return FIRN_BAD_ARGUMENT;
    memset(lengths, 0, symbols);
    if (used == 1)
        how_many[1] = 1;
    /* straight to package-merge where Huffman's code is almost sure to be too long */
    else if (used > 1 && (b.leaves[0] + b.leaves[1] < total >> limit || !huffman(&b, used, limit, how_many)))
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
