/*
 * base/memory.h - small help around a lent allocator
 *
 * Room: base.
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_BASE_MEMORY_H
#define FIRN_BASE_MEMORY_H

#include "firn/memory.h"

#include <stdint.h>
#include <string.h>

/* count * size bytes, zeroed; NULL when the product overflows or memory is out */
void *firn_memory_get_zeroed(const struct firn_memory *memory, size_t count, size_t size);

/*
 * Makes room for `needed` elements in a growing array; doubles. On failure the array stays as it was.
 * FIRN_OK or FIRN_NO_MEMORY.
 */
enum firn_status firn_memory_grow(const struct firn_memory *memory, void **array, size_t *capacity, size_t needed,
                                  size_t element_bytes);

#endif
