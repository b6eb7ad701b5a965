/*
 * coding/sample.h - telling quickly that a segment is not worth coding
 *
 * Room: coding. Pure. What is compressed or enciphered already has all bytes about equally often, everywhere. A
 * sample of it shows that in a fraction of the time that counting all of it takes.
 *
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_CODING_SAMPLE_H
#define FIRN_CODING_SAMPLE_H

#include "coding/cost.h"

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

/*
 * True when 64 pieces of 512 bytes, evenly spread, look as if drawn from 256 equally likely bytes, each for itself
 * and all together: by the number of pairs of equal bytes (W. F. Friedman's index of coincidence, 1922). Prefix codes
 * could then save less than a thousandth. False for fewer than 64 KiB.
 */
bool firn_sample_is_even(const uint8_t *raw, size_t raw_bytes);

/*
 * True when a file, or its beginning, looks packed by the entropy of its bytes, with G. A. Miller's correction for
 * short samples (1955, from memory): more than 7.6 bits a byte, or nearly all that so few bytes can have. A guess that
 * decides who is whose neighbour, and nothing else. `logs` is prepared.
 */
bool firn_sample_is_packed(const struct firn_cost_logs *logs, const uint8_t *raw, size_t raw_bytes);

#endif
