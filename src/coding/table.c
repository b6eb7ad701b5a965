/*
 * coding/table.c - code lengths as tokens under a prefix code of their own
 * SPDX-License-Identifier: BSD-2-Clause
 */
#include "coding/table.h"

#include "firn/prefix.h"

#include <string.h>

enum {
    ABSENT_RUN = 12,                   /* two or more absent symbols: gamma(count - 1) follows */
    REPETITION = 13,                   /* the last length two or more times again: gamma(count - 1) follows */
    TOKEN_LENGTH_BITS = 3,
    FULL = 1 << FIRN_TABLE_LENGTH_LIMIT,
    GAMMA_ZEROS_MAX = 8,               /* a run is at most FIRN_TABLE_ALPHABET_MAX - 1 long */
    REPETITION_PAYS = 3                /* two equal lengths more are as short written out */
};

struct token {
    uint16_t kind, count;              /* count - 1 of a run or repetition, else 0 */
};

/* Bits of v >= 1 in Elias's gamma code: as many zeros as v has bits after its first, then v. */
static unsigned gamma_bits(unsigned v)
{
    unsigned bits = 1;

    for (; v > 1; v >>= 1)
        bits += 2;
    return bits;
}

static size_t tokenise(const uint8_t *lengths, size_t symbols, struct token *tokens)
{
    size_t made = 0, end = symbols;

    while (end > 0 && lengths[end - 1] == 0)
        end--;
    for (size_t s = 0; s < end;) {
        uint8_t length = lengths[s];
        size_t same = 1;

        while (s + same < end && lengths[s + same] == length)
            same++;
        if (length == 0) {
            tokens[made++] = same == 1 ? (struct token){ 0, 0 } : (struct token){ ABSENT_RUN, (uint16_t)(same - 1) };
        } else {
            tokens[made++] = (struct token){ length, 0 };
            if (same - 1 >= REPETITION_PAYS)
                tokens[made++] = (struct token){ REPETITION, (uint16_t)(same - 2) };
            else
                for (size_t k = 1; k < same; k++)
                    tokens[made++] = (struct token){ length, 0 };
        }
        s += same;
    }
    return made;
}

/* Adds what the tokens weigh; returns the bits of what follows them. */
static unsigned weigh(const struct token *tokens, size_t count, uint32_t weights[FIRN_TABLE_TOKENS])
{
    unsigned bits = 0;

    for (size_t i = 0; i < count; i++) {
        weights[tokens[i].kind]++;
        if (tokens[i].kind >= ABSENT_RUN)
            bits += gamma_bits(tokens[i].count);
    }
    return bits;
}

/* The tokens' own code, shared by all tables; returns the bits that everything takes. */
static unsigned plan(const uint8_t *lengths, size_t stride, size_t tables, size_t symbols,
                     uint8_t token_lengths[FIRN_TABLE_TOKENS])
{
    struct token tokens[FIRN_TABLE_ALPHABET_MAX];
    uint32_t weights[FIRN_TABLE_TOKENS] = { 0 };
    uint64_t work[256];                /* firn_prefix_work_bytes(14) is well below: the test of this file checks it */
    unsigned bits = FIRN_TABLE_TOKENS * TOKEN_LENGTH_BITS;

    for (size_t t = 0; t < tables; t++)
        bits += weigh(tokens, tokenise(lengths + t * stride, symbols, tokens), weights);
    firn_prefix_lengths(weights, FIRN_TABLE_TOKENS, FIRN_TABLE_TOKEN_LIMIT, token_lengths, work);
    return bits + (unsigned)firn_prefix_cost_bits(weights, token_lengths, FIRN_TABLE_TOKENS);
}

unsigned firn_table_cost_bits_all(const uint8_t *lengths, size_t stride, size_t tables, size_t symbols)
{
    uint8_t token_lengths[FIRN_TABLE_TOKENS];

    return plan(lengths, stride, tables, symbols, token_lengths);
}

unsigned firn_table_cost_bits(const uint8_t lengths[FIRN_TABLE_SYMBOLS])
{
    return firn_table_cost_bits_all(lengths, FIRN_TABLE_SYMBOLS, 1, FIRN_TABLE_SYMBOLS);
}

void firn_table_write(struct firn_bits_writer *writer, const uint8_t lengths[FIRN_TABLE_SYMBOLS])
{
    firn_table_write_all(writer, lengths, FIRN_TABLE_SYMBOLS, 1, FIRN_TABLE_SYMBOLS);
}

static void write_tokens(struct firn_bits_writer *writer, const struct token *tokens, size_t count,
                         const uint8_t token_lengths[FIRN_TABLE_TOKENS], const uint16_t words[FIRN_TABLE_TOKENS])
{
    for (size_t i = 0; i < count; i++) {
        firn_bits_put(writer, words[tokens[i].kind], token_lengths[tokens[i].kind]);
        if (tokens[i].kind >= ABSENT_RUN) {
            unsigned bits = gamma_bits(tokens[i].count);

            firn_bits_put(writer, 0, bits / 2);
            firn_bits_put(writer, tokens[i].count, bits / 2 + 1);
        }
    }
}

void firn_table_write_all(struct firn_bits_writer *writer, const uint8_t *lengths, size_t stride, size_t tables,
                          size_t symbols)
{
    struct token tokens[FIRN_TABLE_ALPHABET_MAX];
    uint8_t token_lengths[FIRN_TABLE_TOKENS];
    uint16_t words[FIRN_TABLE_TOKENS];

    plan(lengths, stride, tables, symbols, token_lengths);
    firn_prefix_assign(token_lengths, FIRN_TABLE_TOKENS, words);
    for (size_t t = 0; t < FIRN_TABLE_TOKENS; t++)
        firn_bits_put(writer, token_lengths[t], TOKEN_LENGTH_BITS);
    for (size_t t = 0; t < tables; t++)
        write_tokens(writer, tokens, tokenise(lengths + t * stride, symbols, tokens), token_lengths, words);
}

/* 0 when it is no gamma word of at most GAMMA_ZEROS_MAX zeros */
static unsigned take_gamma(struct firn_bits_reader *reader)
{
    unsigned zeros = 0;

    while (zeros <= GAMMA_ZEROS_MAX && firn_bits_take(reader, 1) == 0)
        zeros++;
    if (zeros > GAMMA_ZEROS_MAX)
        return 0;
    return 1u << zeros | firn_bits_take(reader, zeros);
}

/* decode[seven bits] = token << 4 | length; 0 where no word stands */
static enum firn_status read_token_code(struct firn_bits_reader *reader, uint8_t decode[1 << FIRN_TABLE_TOKEN_LIMIT])
{
    uint8_t token_lengths[FIRN_TABLE_TOKENS];
    uint16_t words[FIRN_TABLE_TOKENS];

    memset(decode, 0, 1 << FIRN_TABLE_TOKEN_LIMIT);
    for (size_t t = 0; t < FIRN_TABLE_TOKENS; t++)
        token_lengths[t] = (uint8_t)firn_bits_take(reader, TOKEN_LENGTH_BITS);
    if (firn_prefix_assign(token_lengths, FIRN_TABLE_TOKENS, words) != FIRN_OK)
        return FIRN_BAD_DATA;
    for (size_t t = 0; t < FIRN_TABLE_TOKENS; t++) {
        unsigned span = token_lengths[t] == 0 ? 0 : 1u << (FIRN_TABLE_TOKEN_LIMIT - token_lengths[t]);

        memset(decode + words[t] * span, (int)(t << 4 | token_lengths[t]), span);
    }
    return FIRN_OK;
}

static enum firn_status read_one(struct firn_bits_reader *reader, const uint8_t decode[1 << FIRN_TABLE_TOKEN_LIMIT],
                                 uint8_t *lengths, size_t symbols)
{
    unsigned filled = 0, last = 0;
    size_t s = 0;

    memset(lengths, 0, symbols);
    while (filled < FULL) {
        unsigned entry = decode[firn_bits_peek16(reader) >> (16 - FIRN_TABLE_TOKEN_LIMIT)], count = 1;
        unsigned kind = entry >> 4, length = kind;

        if (entry == 0)
            return FIRN_BAD_DATA;
        reader->at_bits += entry & 15;
        if (kind >= ABSENT_RUN) {
            unsigned more = take_gamma(reader);

            if (more == 0 || (kind == REPETITION && last == 0))
                return FIRN_BAD_DATA;
            count = more + 1;
            length = kind == REPETITION ? last : 0;
        }
        if (count > symbols - s)
            return FIRN_BAD_DATA;                   /* under-full: the symbols end before the code does */
        if (length != 0)
            filled += count << (FIRN_TABLE_LENGTH_LIMIT - length);
        if (count == 1)                            /* nearly always */
            lengths[s] = (uint8_t)length;
        else
            memset(lengths + s, (int)length, count);
        s += count;
        last = length;
    }
    return filled == FULL ? FIRN_OK : FIRN_BAD_DATA;       /* else over-full */
}

enum firn_status firn_table_read_all(struct firn_bits_reader *reader, uint8_t *lengths, size_t stride, size_t tables,
                                     size_t symbols)
{
    uint8_t decode[1 << FIRN_TABLE_TOKEN_LIMIT];

    if (read_token_code(reader, decode) != FIRN_OK)
        return FIRN_BAD_DATA;
    for (size_t t = 0; t < tables; t++)
        if (read_one(reader, decode, lengths + t * stride, symbols) != FIRN_OK)
            return FIRN_BAD_DATA;
    return FIRN_OK;
}

enum firn_status firn_table_read(struct firn_bits_reader *reader, uint8_t lengths[FIRN_TABLE_SYMBOLS])
{
    return firn_table_read_all(reader, lengths, FIRN_TABLE_SYMBOLS, 1, FIRN_TABLE_SYMBOLS);
}
