/*
 * base/bytes.h - the only place that knows byte order
 *
 * Room: base. Everything in a container is little-endian; these loads and stores work at any alignment on any machine.
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_BASE_BYTES_H
#define FIRN_BASE_BYTES_H

#include <stdint.h>
#include <string.h>

#if defined(__BYTE_ORDER__) && __BYTE_ORDER__ == __ORDER_LITTLE_ENDIAN__
#define FIRN_BYTES_LITTLE 1
#else
#define FIRN_BYTES_LITTLE 0
#endif

static inline uint16_t firn_bytes_get16(const uint8_t *at)
{
    return (uint16_t)(at[0] | (uint16_t)(at[1] << 8));
}

static inline uint32_t firn_bytes_get32(const uint8_t *at)
{
#if FIRN_BYTES_LITTLE
    uint32_t value;

    memcpy(&value, at, sizeof value);
    return value;
#else
    return (uint32_t)at[0] | (uint32_t)at[1] << 8 | (uint32_t)at[2] << 16 | (uint32_t)at[3] << 24;
#endif
}

static inline uint64_t firn_bytes_get64(const uint8_t *at)
{
#if FIRN_BYTES_LITTLE
    uint64_t value;

    memcpy(&value, at, sizeof value);
    return value;
#else
    return firn_bytes_get32(at) | (uint64_t)firn_bytes_get32(at + 4) << 32;
#endif
}

static inline void firn_bytes_put16(uint8_t *at, uint16_t value)
{
    at[0] = (uint8_t)value;
    at[1] = (uint8_t)(value >> 8);
}

static inline void firn_bytes_put32(uint8_t *at, uint32_t value)
{
#if FIRN_BYTES_LITTLE
    memcpy(at, &value, sizeof value);
#else
    for (unsigned i = 0; i < 4; i++)
        at[i] = (uint8_t)(value >> 8 * i);
#endif
}

static inline void firn_bytes_put64(uint8_t *at, uint64_t value)
{
#if FIRN_BYTES_LITTLE
    memcpy(at, &value, sizeof value);
#else
    for (unsigned i = 0; i < 8; i++)
        at[i] = (uint8_t)(value >> 8 * i);
#endif
}

#endif
