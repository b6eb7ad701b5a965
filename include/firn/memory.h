/*
 * firn/memory.h - where a room gets its memory
 *
 * Room: base. Rooms above the pure ones take an allocator as an argument, so that a test can make the n-th request fail
 * and a caller can set a limit.
 *
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_MEMORY_H
#define FIRN_MEMORY_H

#include "firn/status.h"

#include <stddef.h>

struct firn_memory {
    void *self;
    /* size > 0; aligned to 64 bytes; contents undefined; NULL when there is no more */
    void *(*get)(void *self, size_t size);
    /* takes NULL; otherwise what get gave */
    void (*put)(void *self, void *block);
};

/* The C library's allocator. Static storage; usable from every thread. */
FIRN_API const struct firn_memory *firn_memory_system(void);

#endif
