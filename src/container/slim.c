/* container/slim.c - sums and sizes of ustar headers, left out and put back */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "container/slim.h"

#include <string.h>

/* IEEE Std 1003.1-2001, pax, "ustar Header Block" */
enum { BLOCK = 512, SIZE_AT = 124, SIZE_DIGITS = 11, SUM_AT = 148, SUM_DIGITS = 6, SUM_BYTES = 8 };

/* The low digits; higher ones are lost, and then it is not the same again. */
static void put_octal(uint8_t *field, unsigned digits, uint64_t value)
{
    while (digits > 0) {
        field[--digits] = (uint8_t)('0' + (value & 7));
        value >>= 3;
    }
}

/* The sum of a block with its sum field taken as spaces. */
static uint32_t sum_of(const uint8_t *block)
{
    uint32_t sum = SUM_BYTES * ' ';

    for (size_t i = 0; i < BLOCK; i++)
        if (i < SUM_AT || i >= SUM_AT + SUM_BYTES)
            sum += block[i];
    return sum;
}

void firn_slim_fill(uint8_t *pax, size_t pax_bytes, uint64_t file_bytes)
{
    uint8_t *last = pax + pax_bytes - BLOCK;

    put_octal(last + SIZE_AT, SIZE_DIGITS, file_bytes);
    put_octal(last + SUM_AT, SUM_DIGITS, sum_of(last));
    if (last != pax)
        put_octal(pax + SUM_AT, SUM_DIGITS, sum_of(pax));
}

bool firn_slim_down(uint8_t *pax, size_t pax_bytes, uint64_t file_bytes)
{
    uint8_t first[BLOCK], end[BLOCK], *last = pax + pax_bytes - BLOCK;

    memcpy(first, pax, BLOCK);
    memcpy(end, last, BLOCK);
    firn_slim_fill(pax, pax_bytes, file_bytes);
    if (memcmp(first, pax, BLOCK) != 0 || memcmp(end, last, BLOCK) != 0) {
        memcpy(pax, first, BLOCK);
        memcpy(last, end, BLOCK);
        return false;
    }
    memset(last + SIZE_AT, 0, SIZE_DIGITS);
    memset(last + SUM_AT, 0, SUM_DIGITS);
    memset(pax + SUM_AT, 0, SUM_DIGITS);
    return true;
}
