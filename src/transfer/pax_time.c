/* transfer/pax_time.c - times before 1970 with a fraction, as POSIX means them */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "transfer/pax_time.h"

#include "transfer/ustar.h"

#include <string.h>

enum { FRACTION_DIGITS = 9, SECONDS_DIGITS_MAX = 18 };

/* Where the digits of "-S.F" stand in a record `mtime`. */
struct digits { size_t seconds_at, seconds, fraction_at, fraction; };

static size_t count_digits(const uint8_t *bytes, size_t at, size_t end)
{
    size_t from = at;

    while (at < end && bytes[at] >= '0' && bytes[at] <= '9')
        at++;
    return at - from;
}

/* The value of the record that begins at `at`: "length mtime=-S.F\n". */
static bool is_negative_time(const uint8_t *bytes, size_t at, size_t end, struct digits *digits)
{
    static const char key[] = " mtime=-";

    at += count_digits(bytes, at, end);
    if (end - at < sizeof key - 1 || memcmp(bytes + at, key, sizeof key - 1) != 0)
        return false;
    digits->seconds_at = at + sizeof key - 1;
    digits->seconds = count_digits(bytes, digits->seconds_at, end);
    digits->fraction_at = digits->seconds_at + digits->seconds + 1;
    if (digits->seconds == 0 || digits->seconds > SECONDS_DIGITS_MAX || digits->fraction_at >= end ||
        bytes[digits->fraction_at - 1] != '.')
        return false;
    digits->fraction = count_digits(bytes, digits->fraction_at, end);
    return digits->fraction > 0 && digits->fraction <= FRACTION_DIGITS;
}

/* Goes through the records of the extended header, if there is one; the last mtime counts. */
static bool find(const uint8_t *header, size_t bytes, struct digits *found)
{
    size_t at = FIRN_USTAR_BYTES, end, size = 0;
    bool any = false;

    if (bytes < 2 * FIRN_USTAR_BYTES || header[FIRN_USTAR_TYPE_AT] != 'x')
        return false;
    for (size_t i = FIRN_USTAR_SIZE_AT; i < FIRN_USTAR_SIZE_AT + 12 && header[i] >= '0' && header[i] <= '7'; i++)
        size = size * 8 + (size_t)(header[i] - '0');
    end = size < bytes - FIRN_USTAR_BYTES ? at + size : bytes;
    while (at < end) {
        size_t length = 0, digits = count_digits(header, at, end);
        struct digits one;

        for (size_t i = 0; i < digits && length <= end; i++)
            length = length * 10 + (size_t)(header[at + i] - '0');
        if (length <= digits || length > end - at)
            break;
        if (is_negative_time(header, at, at + length, &one)) {
            *found = one;
            any = true;
        }
        at += length;
    }
    return any;
}

static uint64_t number_at(const uint8_t *bytes, size_t at, size_t digits)
{
    uint64_t value = 0;

    for (size_t i = 0; i < digits; i++)
        value = value * 10 + (uint64_t)(bytes[at + i] - '0');
    return value;
}

/* Writes value with so many digits, zeros in front. */
static void put_number(uint8_t *bytes, size_t at, size_t digits, uint64_t value)
{
    while (digits > 0) {
        bytes[at + --digits] = (uint8_t)('0' + value % 10);
        value /= 10;
    }
}

static uint64_t power_of_ten(size_t digits)
{
    uint64_t power = 1;

    while (digits-- > 0)
        power *= 10;
    return power;
}

void firn_pax_time_mend(uint8_t *header, size_t bytes)
{
    uint64_t seconds, fraction;
    struct digits d;

    if (!find(header, bytes, &d))
        return;
    seconds = number_at(header, d.seconds_at, d.seconds);
    fraction = number_at(header, d.fraction_at, d.fraction);
    if (seconds == 0 || fraction == 0)
        return;
    /* leading zeros keep the record as long as its length says: 1000.5 becomes 0999.5 */
    put_number(header, d.seconds_at, d.seconds, seconds - 1);
    put_number(header, d.fraction_at, d.fraction, power_of_ten(d.fraction) - fraction);
}

bool firn_pax_time_read(const uint8_t *header, size_t bytes, int64_t *seconds, long *nanoseconds)
{
    uint64_t fraction;
    struct digits d;

    if (!find(header, bytes, &d))
        return false;
    fraction = number_at(header, d.fraction_at, d.fraction) * power_of_ten(FRACTION_DIGITS - d.fraction);
    if (fraction == 0)
        return false;
    *seconds = -(int64_t)number_at(header, d.seconds_at, d.seconds) - 1;
    *nanoseconds = (long)(1000000000 - fraction);
    return true;
}
