/*
 * transfer/pax_time.h - times before 1970 with a fraction, as POSIX means them
 *
 * Room: transfer. In a pax header a time is a decimal number, so half a second before 1970 is -0.5. libarchive 3.6
 * writes the seconds rounded down and then the fraction as it counts forward (-1.5), and reads what it writes; other
 * readers are off by up to two seconds then. This puts the number right, and reads the right number.
 *
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_TRANSFER_PAX_TIME_H
#define FIRN_TRANSFER_PAX_TIME_H

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

/* Puts right the mtime that libarchive wrote into a header (extended header in front), in place; lengths stay. */
void firn_pax_time_mend(uint8_t *header, size_t bytes);

/* True when a header has an mtime below 1970 with a fraction: then it is told, seconds rounded down. */
bool firn_pax_time_read(const uint8_t *header, size_t bytes, int64_t *seconds, long *nanoseconds);

#endif
