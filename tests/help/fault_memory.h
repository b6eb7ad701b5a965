/*
 * tests/help/fault_memory.h - an allocator that fails its n-th request, and counts what was not given back
 *
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_TESTS_FAULT_MEMORY_H
#define FIRN_TESTS_FAULT_MEMORY_H

#include "firn/memory.h"

#include <stdlib.h>

struct fault_memory {
    struct firn_memory memory;
    unsigned requests, fail_at;        /* fail_at 0: never */
    int outstanding;
};

static inline void *fault_memory_get(void *self, size_t size)
{
    struct fault_memory *fault = self;
    void *block = NULL;

    if (++fault->requests == fault->fail_at || size == 0 || posix_memalign(&block, 64, size) != 0)
        return NULL;
    fault->outstanding++;
    return block;
}

static inline void fault_memory_put(void *self, void *block)
{
    struct fault_memory *fault = self;

    fault->outstanding -= block != NULL;
    free(block);
}

static inline void fault_memory_make(struct fault_memory *fault, unsigned fail_at)
{
    *fault = (struct fault_memory){ .memory = { fault, fault_memory_get, fault_memory_put }, .fail_at = fail_at };
}

#endif
