/*
 * firn/reserve.h - the Reed-Solomon reserve of a row: any m of its k + m payloads can be lost and come back
 *
 * Room: guard. At every byte offset take the one polynomial over GF(2^8) (field polynomial 0x11D) of degree < 256 - m
 * whose value at the point m + i is the byte of data payload i, and 0 at the points from m + k on. Reserve payload j is
 * its value at the point j, j < m. The integer i stands for the field element with that bit pattern.
 *
 * Method: I. S. Reed and G. Solomon, "Polynomial Codes over Certain Finite Fields", J. SIAM 8(2), 1960, pp. 300-304;
 * transforms by S.-J. Lin, W.-H. Chung and Y. S. Han, "Novel Polynomial Basis and Its Application to Reed-Solomon
 * Erasure Codes", FOCS 2014. Lost payloads come back by Lagrange's formula (format-spec/sheet.md).
 *
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_RESERVE_H
#define FIRN_RESERVE_H

#include "firn/status.h"

#include <stddef.h>
#include <stdint.h>

/* Work space for either call, in bytes; its contents need no set-up and mean nothing afterwards. */
FIRN_API size_t firn_reserve_work_bytes(void);

/*
 * Computes the m reserve payloads of a row.
 *
 * k, m     m is a power of two, 1 .. 128; 1 <= k, k + m <= 256
 * data     k pointers; NULL stands for a payload of zeros
 * reserve  m pointers to where the result goes
 * bytes    of each payload, any number
 * work     firn_reserve_work_bytes(), aligned to 64
 *
 * FIRN_OK or FIRN_BAD_ARGUMENT. Allocates nothing; different threads use different work.
 */
FIRN_API enum firn_status firn_reserve_encode(unsigned k, unsigned m, const uint8_t *const *data,
                                              uint8_t *const *reserve, size_t bytes, uint8_t *work);

/*
 * Gives back the lost payloads of a row.
 *
 * payloads  k + m pointers, data first; NULL is allowed for a data payload of zeros that is not lost
 * lost      `lost_count` distinct positions in payloads, ascending; what the payloads there hold is not read, and is
 *           overwritten by what belongs there
 *
 * FIRN_OK, FIRN_BEYOND_REPAIR when lost_count > m (nothing is written), FIRN_BAD_ARGUMENT.
 */
FIRN_API enum firn_status firn_reserve_rebuild(unsigned k, unsigned m, uint8_t *const *payloads, const unsigned *lost,
                                               unsigned lost_count, size_t bytes, uint8_t *work);

#endif
