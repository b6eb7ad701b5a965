/*
 * guard/reserve_engine.h - the hot loops of the reserve, by several engines
 *
 * Room: guard. Pure. Used by guard/reserve.c and guard/columns.c. A factor of GF(2^8) comes as its table of 32 bytes:
 * its products with 0 .. 15, then with 0, 16 .. 240; the product with any byte is one of the first half XOR one of
 * the second. Pointers need no alignment. from[i] may be to[i], and otherwise nothing overlaps. Every engine gives
 * the answer of the plain one.
 *
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_GUARD_RESERVE_ENGINE_H
#define FIRN_GUARD_RESERVE_ENGINE_H

#include "firn/reserve.h"
#include "guard/gf.h"

#include <stdbool.h>

enum { FIRN_RESERVE_TABLE_BYTES = FIRN_GF_TABLE_BYTES, FIRN_RESERVE_TOGETHER = 4, FIRN_RESERVE_SOURCES = 128 };

/*
 * A step of a transform on two runs of bytes, u and v, with one factor, or two levels of steps on four with three.
 * `ahead` is two runs of as many bytes that will be wanted soon: an engine may ask for them, and need not.
 */
typedef void firn_reserve_step(const uint8_t *const *from, uint8_t *const *to, const uint8_t *const *tables,
                               size_t bytes, const uint8_t *const ahead[2]);

struct firn_reserve_engine {
    const char *name;
    bool (*usable)(void);      /* asks the processor */

    firn_reserve_step *inverse2;      /* v += u, then u += factor v */
    firn_reserve_step *inverse4;      /* inverse2 on 0, 1 by factor 0, on 2, 3 by 1, on 0, 2 and on 1, 3 by 2 */
    firn_reserve_step *inverse4_add;  /* the same, but added to what stands in to; no from[i] is a to[i] */
    firn_reserve_step *forward2;      /* u += factor v, then v += u */
    firn_reserve_step *forward4;      /* undoes inverse4 */

    /*
     * to[i] = the sum over j < count of factor i * count + j times from[j], for i < FIRN_RESERVE_TOGETHER; count is
     * at most FIRN_RESERVE_SOURCES.
     */
    void (*combine)(const uint8_t *const *from, unsigned count, const uint8_t *const *tables, uint8_t *const *to,
                    size_t bytes);
};

extern const struct firn_reserve_engine firn_reserve_plain;
#if defined(__x86_64__) && !defined(FIRN_PLAIN)
extern const struct firn_reserve_engine firn_reserve_ssse3, firn_reserve_avx2;
#elif defined(__aarch64__) && !defined(FIRN_PLAIN)
extern const struct firn_reserve_engine firn_reserve_neon;
#endif
extern const struct firn_reserve_engine *const firn_reserve_engines[];      /* fastest first, plain, NULL */

/* The first engine that the processor at hand can run. */
const struct firn_reserve_engine *firn_reserve_engine_here(void);

/* What firn/reserve.h promises, by a given engine. */
enum firn_status firn_reserve_encode_by(const struct firn_reserve_engine *engine, unsigned k, unsigned m,
                                        const uint8_t *const *data, uint8_t *const *reserve, size_t bytes,
                                        uint8_t *work);
enum firn_status firn_reserve_rebuild_by(const struct firn_reserve_engine *engine, unsigned k, unsigned m,
                                         uint8_t *const *payloads, const unsigned *lost, unsigned lost_count,
                                         size_t bytes, uint8_t *work);

#endif
