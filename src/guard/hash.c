/*
 * guard/hash.c - XXH3-128 with seed 0, by the library's fastest code for the processor at hand
 * SPDX-License-Identifier: BSD-2-Clause
 */
#include "guard/hash.h"

#include "base/bytes.h"

#include <string.h>
#if defined(__x86_64__) && !defined(FIRN_PLAIN)
#include <xxh_x86dispatch.h>      /* puts its own choice in the place of XXH3_128bits */
#else
#include <xxhash.h>
#endif

void firn_hash_put(const uint8_t *bytes, size_t count, uint8_t *hash)
{
    XXH128_hash_t value = XXH3_128bits(bytes, count);

    firn_bytes_put64(hash, value.low64);
    firn_bytes_put64(hash + 8, value.high64);
}

bool firn_hash_matches(const uint8_t *bytes, size_t count, const uint8_t *hash)
{
    uint8_t found[FIRN_HASH_BYTES];

    firn_hash_put(bytes, count, found);
    return memcmp(found, hash, sizeof found) == 0;
}

uint64_t firn_hash_low(const uint8_t *bytes, size_t count)
{
    return XXH3_128bits(bytes, count).low64;
}
