/*
 * base/log2.h - where the highest bit of a number is
 *
 * Room: base. SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_BASE_LOG2_H
#define FIRN_BASE_LOG2_H

#include <stdint.h>

/* The logarithm rounded down; n is not 0. */
static inline unsigned firn_log2(uint32_t n)
{
#if defined(__GNUC__)
    return 31u - (unsigned)__builtin_clz(n);
#else
    unsigned log = 0;

    for (; n > 1; n >>= 1)
        log++;
    return log;
#endif
}

#endif
