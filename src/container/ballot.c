/* container/ballot.c - one block out of several damaged copies or readings of it */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "container/ballot.h"

#include "base/bytes.h"

enum {
    LABEL_BITS = 10,              /* nine of the label, and one that every word has: the overall parity */
    DISPUTED_MAX = 64,            /* words that one lane's copies may differ in for the lane to be searched */
    ALL_SETS_MAX = 14,            /* so few differing words: every set of them is tried, else sets of at most three */
    ANSWERS_MAX = 8,              /* kept for one lane */
    FLIPS_MAX = ALL_SETS_MAX,
    HASHES_MAX = 4096
};

/* A set of words whose bits of one lane are to be flipped to make the lane a code word. */
struct answer { uint16_t words[FLIPS_MAX]; uint8_t count; };

struct lane {
    uint16_t disputed[DISPUTED_MAX];
    unsigned disputed_count;
    bool too_many;
    unsigned syndrome;            /* of the majority */
    struct answer answers[ANSWERS_MAX];      /* fewest flips first */
    unsigned answer_count;
};

struct ballot {
    uint64_t majority[FIRN_BLOCK_WORDS], disputed[FIRN_BLOCK_WORDS];
    uint16_t labels[FIRN_BLOCK_WORDS];
    struct lane lane;
    /* lanes with more than one answer, to be gone through together */
    struct answer open[FIRN_LANES][ANSWERS_MAX];
    unsigned open_lane[FIRN_LANES], open_count[FIRN_LANES], opens;
};

/* format-spec/block.md, section 3 */
static void make_labels(uint16_t labels[FIRN_BLOCK_WORDS])
{
    unsigned label = 3;

    for (unsigned word = 0; word < FIRN_LANES_DATA_WORDS; word++, label++) {
        if ((label & (label - 1)) == 0)
            label++;
        labels[word] = (uint16_t)(label | 1U << (LABEL_BITS - 1));
    }
    for (unsigned j = 0; j < FIRN_LANES_PARITY_WORDS; j++)
        labels[FIRN_LANES_DATA_WORDS + j] = (uint16_t)(1U << j | 1U << (LABEL_BITS - 1));
    labels[FIRN_BLOCK_WORDS - 1] = 1U << (LABEL_BITS - 1);
}

/* Counts the copies' ones in all 64 bits of a word at once: plane p holds the bits of weight 2^p. */
static void count_votes(struct ballot *ballot, const uint8_t *const *copies, size_t count, unsigned word)
{
    enum { PLANES = 6 };
    uint64_t planes[PLANES] = { 0 }, any = 0, all = UINT64_MAX, more = 0, equal = UINT64_MAX;
    size_t half = count / 2;      /* a bit is one when more than half say so; a tie goes to the first copy */
    uint64_t first = firn_bytes_get64(copies[0] + 8 * (size_t)word);

    for (size_t i = 0; i < count; i++) {
        uint64_t carry = firn_bytes_get64(copies[i] + 8 * (size_t)word);

        any |= carry;
        all &= carry;
        for (unsigned p = 0; p < PLANES; p++) {
            uint64_t both = planes[p] & carry;

            planes[p] ^= carry;
            carry = both;
        }
    }
    for (unsigned p = PLANES; p-- > 0;) {
        uint64_t bit = half >> p & 1 ? UINT64_MAX : 0;

        more |= equal & planes[p] & ~bit;
        equal &= ~(planes[p] ^ bit);
    }
    if (count % 2 == 0)
        more |= equal & first;
    ballot->majority[word] = more;
    ballot->disputed[word] = any & ~all;
}

static void put_block(const uint64_t words[FIRN_BLOCK_WORDS], uint8_t *block)
{
    for (size_t word = 0; word < FIRN_BLOCK_WORDS; word++)
        firn_bytes_put64(block + 8 * word, words[word]);
}

static void look_at_lane(struct ballot *ballot, unsigned bit)
{
    struct lane *lane = &ballot->lane;

    *lane = (struct lane){ .disputed_count = 0 };
    for (unsigned word = 0; word < FIRN_BLOCK_WORDS; word++) {
        if (ballot->majority[word] >> bit & 1)
            lane->syndrome ^= ballot->labels[word];
        if (!(ballot->disputed[word] >> bit & 1))
            continue;
        lane->too_many = lane->too_many || lane->disputed_count == DISPUTED_MAX;
        if (!lane->too_many)
            lane->disputed[lane->disputed_count++] = (uint16_t)word;
    }
}

static void add_answer(struct lane *lane, const uint16_t *words, unsigned count)
{
    struct answer *answer;

    if (lane->answer_count == ANSWERS_MAX)
        return;
    answer = &lane->answers[lane->answer_count++];
    answer->count = (uint8_t)count;
    memcpy(answer->words, words, count * sizeof *words);
}

/* All sets of `size` words out of the disputed ones whose labels add up to the syndrome; size at most 3. */
static void search_small_sets(const struct ballot *ballot, struct lane *lane)
{
    const uint16_t *at = lane->disputed, *labels = ballot->labels;
    unsigned n = lane->disputed_count, s = lane->syndrome;

    for (unsigned i = 0; i < n; i++)
        if (labels[at[i]] == s)
            add_answer(lane, (const uint16_t[]){ at[i] }, 1);
    for (unsigned i = 0; i < n; i++)
        for (unsigned j = i + 1; j < n; j++)
            if ((labels[at[i]] ^ labels[at[j]]) == (int)s)
                add_answer(lane, (const uint16_t[]){ at[i], at[j] }, 2);
    for (unsigned i = 0; i < n; i++)
        for (unsigned j = i + 1; j < n; j++)
            for (unsigned k = j + 1; k < n; k++)
                if ((labels[at[i]] ^ labels[at[j]] ^ labels[at[k]]) == (int)s)
                    add_answer(lane, (const uint16_t[]){ at[i], at[j], at[k] }, 3);
}

/* The sets of more than three words, where there are few enough of them to try all. */
static void search_large_sets(const struct ballot *ballot, struct lane *lane)
{
    for (unsigned size = 4; size <= lane->disputed_count; size++)
        for (unsigned set = 0; set < 1U << lane->disputed_count; set++) {
            uint16_t words[FLIPS_MAX];
            unsigned sum = 0, count = 0;

            for (unsigned i = 0; i < lane->disputed_count && count <= size; i++)
                if (set >> i & 1) {
                    sum ^= ballot->labels[lane->disputed[i]];
                    if (count < FLIPS_MAX)
                        words[count] = lane->disputed[i];
                    count++;
                }
            if (count == size && sum == lane->syndrome)
                add_answer(lane, words, count);
            if (lane->answer_count == ANSWERS_MAX)
                return;
        }
}

static void flip(uint64_t words[FIRN_BLOCK_WORDS], const struct answer *answer, unsigned bit)
{
    for (unsigned i = 0; i < answer->count; i++)
        words[answer->words[i]] ^= UINT64_C(1) << bit;
}

/*
 * Makes every lane a code word that differs from the majority where copies differ and in as few bits as can be. A lane
 * that is a code word already may be the wrong one, but then four bits of it at least have the wrong majority.
 */
static void settle_lanes(struct ballot *ballot)
{
    struct lane *lane = &ballot->lane;

    for (unsigned bit = 0; bit < FIRN_LANES; bit++) {
        look_at_lane(ballot, bit);
        if (lane->syndrome == 0 || lane->too_many)
            continue;
        search_small_sets(ballot, lane);
        if (lane->answer_count == 0 && lane->disputed_count <= ALL_SETS_MAX)
            search_large_sets(ballot, lane);
        if (lane->answer_count == 1)
            flip(ballot->majority, &lane->answers[0], bit);
        if (lane->answer_count > 1) {
            memcpy(ballot->open[ballot->opens], lane->answers, sizeof lane->answers);
            ballot->open_lane[ballot->opens] = bit;
            ballot->open_count[ballot->opens++] = lane->answer_count;
        }
    }
}

/* Goes through the answers of the lanes that have several, all combinations of them, until the hash says yes. */
static enum firn_block_state try_answers(struct ballot *ballot, uint8_t *block, struct firn_block_tag *tag)
{
    unsigned chosen[FIRN_LANES] = { 0 }, place;

    for (unsigned i = 0; i < ballot->opens; i++)
        flip(ballot->majority, &ballot->open[i][0], ballot->open_lane[i]);
    for (unsigned tries = 0; tries < HASHES_MAX; tries++) {
        enum firn_block_state state;

        put_block(ballot->majority, block);
        state = firn_block_open(block, true, tag);
        if (state != FIRN_BLOCK_GONE)
            return state;
        /* the next combination: count up, one lane a digit */
        for (place = 0; place < ballot->opens; place++) {
            flip(ballot->majority, &ballot->open[place][chosen[place]], ballot->open_lane[place]);
            chosen[place] = (chosen[place] + 1) % ballot->open_count[place];
            flip(ballot->majority, &ballot->open[place][chosen[place]], ballot->open_lane[place]);
            if (chosen[place] > 0)
                break;
        }
        if (place == ballot->opens)
            break;
    }
    return FIRN_BLOCK_GONE;
}

enum firn_block_state firn_ballot_decide(const uint8_t *const *copies, size_t count,
                                         uint8_t block[FIRN_BLOCK_BYTES], struct firn_block_tag *tag)
{
    uint8_t trial[FIRN_BLOCK_BYTES];
    struct ballot ballot;
    enum firn_block_state state;

    for (size_t i = 0; i < count; i++) {
        memcpy(trial, copies[i], sizeof trial);
        state = firn_block_open(trial, true, tag);
        if (state != FIRN_BLOCK_GONE) {
            memcpy(block, trial, sizeof trial);
            return state;
        }
    }
    memset(&ballot, 0, sizeof ballot);
    make_labels(ballot.labels);
    for (unsigned word = 0; word < FIRN_BLOCK_WORDS; word++)
        count_votes(&ballot, copies, count, word);
    put_block(ballot.majority, trial);
    memcpy(block, trial, sizeof trial);
    if (count == 1)
        return FIRN_BLOCK_GONE;
    state = firn_block_open(trial, true, tag);
    if (state == FIRN_BLOCK_GONE) {
        settle_lanes(&ballot);
        state = try_answers(&ballot, trial, tag);
    }
    if (state == FIRN_BLOCK_GONE)
        return state;
    memcpy(block, trial, sizeof trial);
    return state == FIRN_BLOCK_SOUND ? FIRN_BLOCK_MENDED : state;
}

enum firn_status firn_ballot_reread(struct firn_store *store, uint64_t at, unsigned times, bool held,
                                    const struct firn_memory *memory, uint8_t block[FIRN_BLOCK_BYTES])
{
    const uint8_t *copies[FIRN_BALLOT_COPIES_MAX];
    size_t count = held ? 1 : 0, room = times < FIRN_BALLOT_COPIES_MAX ? times + count : FIRN_BALLOT_COPIES_MAX;
    uint8_t *readings = memory->get(memory->self, (room + 1) * FIRN_BLOCK_BYTES);
    enum firn_status status = FIRN_LOST;
    struct firn_block_tag tag;

    if (readings == NULL)      /* without memory there is no second chance, as if nobody had asked for one */
        return FIRN_LOST;
    if (held)
        memcpy(readings, block, FIRN_BLOCK_BYTES);
    copies[0] = readings;
    for (unsigned i = 0; i < times && count < FIRN_BALLOT_COPIES_MAX && status != FIRN_OK; i++) {
        uint8_t *reading = readings + count * FIRN_BLOCK_BYTES;
        size_t got = 0;
        int why;

        store->forget(store->self, at, FIRN_BLOCK_BYTES);
        if (store->read_at(store->self, at, reading, FIRN_BLOCK_BYTES, &got, &why) != FIRN_OK ||
            got < FIRN_BLOCK_BYTES)
            continue;
        copies[count++] = reading;
        memcpy(block, reading, FIRN_BLOCK_BYTES);
        if (firn_block_open(block, true, &tag) != FIRN_BLOCK_GONE)
            status = FIRN_OK;
    }
    if (status != FIRN_OK && count > 0 && firn_ballot_decide(copies, count, block, &tag) != FIRN_BLOCK_GONE)
        status = FIRN_OK;
    memory->put(memory->self, readings);
    return status;
}
