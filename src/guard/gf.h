/*
 * guard/gf.h - arithmetic in GF(2^8) with the field polynomial x^8 + x^4 + x^3 + x^2 + 1 (0x11D)
 *
 * Room: guard. Pure. Used by guard/reserve.c and guard/columns.c. The integer 0..255 stands for the field element
 * with that bit pattern; addition is XOR. For single values; long runs of bytes are the affair of
 * guard/reserve_engine.h.
 *
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_GUARD_GF_H
#define FIRN_GUARD_GF_H

#include <stdint.h>

enum { FIRN_GF_POLYNOMIAL = 0x11D };

extern const uint8_t firn_gf_power[255];      /* firn_gf_power[i] = 2 to the i */
extern const uint8_t firn_gf_log[256];        /* of 1 .. 255; the entry of 0 means nothing */

uint8_t firn_gf_multiply(uint8_t a, uint8_t b);
uint8_t firn_gf_inverse(uint8_t a);           /* a must not be 0 */

/* The factor tables of guard/reserve_engine.h, of every factor. */
enum { FIRN_GF_TABLE_BYTES = 32 };
void firn_gf_make_tables(uint8_t tables[256][FIRN_GF_TABLE_BYTES]);

#endif
