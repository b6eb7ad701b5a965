/* examples/damage.c - spoils a file on purpose: flips bits, loses blocks, wipes runs. For rehearsals on copies. */
/* SPDX-License-Identifier: BSD-2-Clause */
#define _POSIX_C_SOURCE 200809L
#include <inttypes.h>
#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

/*
 * usage: damage FILE flip COUNT SEED        flips COUNT bits at places that follow from SEED
 *        damage FILE rate RATE SEED         flips every bit with the probability RATE (raw bit error rate)
 *        damage FILE lose RATE SEED         fills every piece of 4096 bytes with noise, with the probability RATE
 *        damage FILE wipe AT BYTES          overwrites bytes with 0xA5
 */
enum { PIECE = 4096, BUFFER = 1 << 20 };

static uint64_t next_random(uint64_t *state)
{
    uint64_t x = *state += UINT64_C(0x9E3779B97F4A7C15);      /* Weyl sequence, scrambled by multiply and shift */

    x = (x ^ x >> 30) * UINT64_C(0xBF58476D1CE4E5B9);
    x = (x ^ x >> 27) * UINT64_C(0x94D049BB133111EB);
    return x ^ x >> 31;
}

static int flip(FILE *file, uint64_t count, uint64_t seed, uint64_t size)
{
    for (uint64_t i = 0; i < count; i++) {
        uint64_t bit = next_random(&seed) % (size * 8);
        int byte;

        if (fseeko(file, (off_t)(bit / 8), SEEK_SET) != 0 || (byte = getc(file)) == EOF)
            return 1;
        if (fseeko(file, (off_t)(bit / 8), SEEK_SET) != 0 || putc(byte ^ 1 << bit % 8, file) == EOF)
            return 1;
    }
    return 0;
}

/* Strictly between 0 and 1. */
static double next_fraction(uint64_t *state)
{
    return ((double)(next_random(state) >> 11) + 0.5) / 9007199254740992.0;
}

/* How many trials of this rate fail before the next one succeeds: geometric, by inversion. */
static uint64_t next_gap(double rate, uint64_t *state)
{
    double gap = rate < 1 ? floor(log(next_fraction(state)) / log1p(-rate)) : 0;

    return gap < 1e18 ? (uint64_t)gap : UINT64_C(1000000000000000000);
}

static int flip_at_rate(FILE *file, double rate, uint64_t seed, uint64_t size)
{
    static unsigned char bytes[BUFFER];
    uint64_t next = next_gap(rate, &seed);      /* the next bit to flip */

    for (uint64_t at = 0; at < size; at += BUFFER) {
        size_t count = size - at < BUFFER ? (size_t)(size - at) : BUFFER;

        if (fseeko(file, (off_t)at, SEEK_SET) != 0 || fread(bytes, 1, count, file) != count)
            return 1;
        for (; next / 8 < at + count; next += 1 + next_gap(rate, &seed))
            bytes[next / 8 - at] ^= (unsigned char)(1U << next % 8);
        if (fseeko(file, (off_t)at, SEEK_SET) != 0 || fwrite(bytes, 1, count, file) != count)
            return 1;
    }
    return 0;
}

static int lose(FILE *file, double rate, uint64_t seed, uint64_t size)
{
    for (uint64_t piece = next_gap(rate, &seed); piece < size / PIECE; piece += 1 + next_gap(rate, &seed)) {
        if (fseeko(file, (off_t)(piece * PIECE), SEEK_SET) != 0)
            return 1;
        for (unsigned i = 0; i < PIECE; i++)
            if (putc((int)(next_random(&seed) & 0xFF), file) == EOF)
                return 1;
    }
    return 0;
}

static int wipe(FILE *file, uint64_t at, uint64_t bytes)
{
    if (fseeko(file, (off_t)at, SEEK_SET) != 0)
        return 1;
    for (uint64_t i = 0; i < bytes; i++)
        if (putc(0xA5, file) == EOF)
            return 1;
    return 0;
}

static int damage(FILE *file, char **words)
{
    uint64_t size = (uint64_t)ftello(file), last = strtoull(words[2], NULL, 10);

    if (strcmp(words[0], "flip") == 0)
        return flip(file, strtoull(words[1], NULL, 10), last, size);
    if (strcmp(words[0], "rate") == 0)
        return flip_at_rate(file, strtod(words[1], NULL), last, size);
    if (strcmp(words[0], "lose") == 0)
        return lose(file, strtod(words[1], NULL), last, size);
    return wipe(file, strtoull(words[1], NULL, 10), last);
}

static int known(const char *word)
{
    return strcmp(word, "flip") == 0 || strcmp(word, "rate") == 0 || strcmp(word, "lose") == 0
        || strcmp(word, "wipe") == 0;
}

int main(int argc, char **argv)
{
    int rated = argc == 5 && (strcmp(argv[2], "rate") == 0 || strcmp(argv[2], "lose") == 0);
    FILE *file;
    int failed;

    if (argc != 5 || !known(argv[2]) || (rated && !(strtod(argv[3], NULL) > 0 && strtod(argv[3], NULL) <= 1))) {
        fputs("usage: damage FILE flip COUNT SEED | damage FILE rate RATE SEED | damage FILE lose RATE SEED\n"
              "     | damage FILE wipe AT BYTES      (0 < RATE <= 1)\n", stderr);
        return 64;
    }
    file = fopen(argv[1], "r+b");
    if (file == NULL || fseeko(file, 0, SEEK_END) != 0) {
        perror(argv[1]);
        return 66;
    }
    failed = damage(file, argv + 2);
    if (fclose(file) != 0 || failed) {
        perror(argv[1]);
        return 74;
    }
    return 0;
}
