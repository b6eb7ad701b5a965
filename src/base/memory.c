/* base/memory.c - the C library's allocator behind firn/memory.h */
/* SPDX-License-Identifier: BSD-2-Clause */
#define _DEFAULT_SOURCE     /* madvise */
#include "base/memory.h"

#include <stdlib.h>
#include <sys/mman.h>

enum {
    ALIGNMENT = 64,                     /* a cache line; the vector engines like it */
    HUGE_ALIGNMENT = 2 << 20,           /* a sheet in pages of 2 MiB: 31 000 page faults cost as much as mending it */
    HUGE_FROM = 16 << 20
};

static void *system_get(void *self, size_t size)
{
    void *block = NULL;

    (void)self;
    if (size == 0 || posix_memalign(&block, size < HUGE_FROM ? ALIGNMENT : HUGE_ALIGNMENT, size) != 0)
        return NULL;
#ifdef MADV_HUGEPAGE
    if (size >= HUGE_FROM)
        (void)madvise(block, size, MADV_HUGEPAGE);      /* a wish; without it all is the same but slower */
#endif
    return block;
}

static void system_put(void *self, void *block)
{
    (void)self;
    free(block);
}

static const struct firn_memory system_memory = { NULL, system_get, system_put };

const struct firn_memory *firn_memory_system(void)
{
    return &system_memory;
}

void *firn_memory_get_zeroed(const struct firn_memory *memory, size_t count, size_t size)
{
    void *block;

    if (count == 0 || size == 0 || count > SIZE_MAX / size)
        return NULL;
    block = memory->get(memory->self, count * size);
    if (block != NULL)
        memset(block, 0, count * size);
    return block;
}

enum firn_status firn_memory_grow(const struct firn_memory *memory, void **array, size_t *capacity, size_t needed,
                                  size_t element_bytes)
{
    size_t wanted = *capacity < 16 ? 16 : *capacity;
    void *larger;

    if (needed <= *capacity)
        return FIRN_OK;
    while (wanted < needed) {
        if (wanted > SIZE_MAX / 2)
            return FIRN_NO_MEMORY;
        wanted *= 2;
    }
    if (wanted > SIZE_MAX / element_bytes)
        return FIRN_NO_MEMORY;
    larger = memory->get(memory->self, wanted * element_bytes);
    if (larger == NULL)
        return FIRN_NO_MEMORY;
    if (*array != NULL)
        memcpy(larger, *array, *capacity * element_bytes);
    memory->put(memory->self, *array);
    *array = larger;
    *capacity = wanted;
    return FIRN_OK;
}
