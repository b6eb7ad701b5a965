/*
 * guard/hash.h - the 128-bit hash that decides what may be handed out as good
 *
 * Room: guard. XXH3-128, seed 0, by the xxHash library with its run-time dispatch. It catches accidents, not tampering.
 * In a container it stands as 16 bytes: low half, then high half, each little-endian.
 *
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_GUARD_HASH_H
#define FIRN_GUARD_HASH_H

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

enum { FIRN_HASH_BYTES = 16 };

/* Writes the 16 bytes of the hash of bytes[0 .. count). */
void firn_hash_put(const uint8_t *bytes, size_t count, uint8_t *hash);

/* True when hash holds the 16 bytes of the hash of bytes[0 .. count). */
bool firn_hash_matches(const uint8_t *bytes, size_t count, const uint8_t *hash);

/* The low half alone. */
uint64_t firn_hash_low(const uint8_t *bytes, size_t count);

#endif
