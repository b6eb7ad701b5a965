/* examples/damage.c - spoils a file on purpose: flips bits all over it, wipes a run. For rehearsals, on copies only. */
/* SPDX-License-Identifier: BSD-2-Clause */
#define _POSIX_C_SOURCE 200809L
#include <inttypes.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

/*
 * usage: damage FILE flip COUNT SEED        flips COUNT bits at places that follow from SEED
 *        damage FILE wipe AT BYTES          overwrites bytes with 0xA5
 */
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

static int wipe(FILE *file, uint64_t at, uint64_t bytes)
{
    if (fseeko(file, (off_t)at, SEEK_SET) != 0)
        return 1;
    for (uint64_t i = 0; i < bytes; i++)
        if (putc(0xA5, file) == EOF)
            return 1;
    return 0;
}

int main(int argc, char **argv)
{
    FILE *file;
    int failed;

    if (argc != 5 || (strcmp(argv[2], "flip") != 0 && strcmp(argv[2], "wipe") != 0)) {
        fputs("usage: damage FILE flip COUNT SEED | damage FILE wipe AT BYTES\n", stderr);
        return 64;
    }
    file = fopen(argv[1], "r+b");
    if (file == NULL || fseeko(file, 0, SEEK_END) != 0) {
        perror(argv[1]);
        return 66;
    }
    if (argv[2][0] == 'f')
        failed = flip(file, strtoull(argv[3], NULL, 10), strtoull(argv[4], NULL, 10), (uint64_t)ftello(file));
    else
        failed = wipe(file, strtoull(argv[3], NULL, 10), strtoull(argv[4], NULL, 10));
    if (fclose(file) != 0 || failed) {
        perror(argv[1]);
        return 74;
    }
    return 0;
}
