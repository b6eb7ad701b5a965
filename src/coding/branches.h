/*
 * coding/branches.h - where x86 code jumps to, as places instead of distances
 *
 * Room: coding. Pure. A call says how far away the function is, so two calls of one function differ. Told from where
 * the segment starts they are equal, and repeats are longer. Meaning: format-spec/segment.md, "Branches". Any bytes can
 * be turned, and turned back.
 *
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_CODING_BRANCHES_H
#define FIRN_CODING_BRANCHES_H

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

/* In place. Returns how many were turned. */
size_t firn_branches_turn(uint8_t *bytes, size_t byte_count);
size_t firn_branches_turn_back(uint8_t *bytes, size_t byte_count);

#endif
