/*
 * coding/histogram.h - how often each byte occurs: the first step of every prefix code
 *
 * Room: coding. Pure.
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_CODING_HISTOGRAM_H
#define FIRN_CODING_HISTOGRAM_H

#include <stddef.h>
#include <stdint.h>

/* counts[b] becomes the number of bytes equal to b. */
void firn_histogram_count(const uint8_t *bytes, size_t byte_count, uint32_t counts[256]);

#endif
