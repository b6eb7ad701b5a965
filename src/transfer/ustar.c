/* transfer/ustar.c - the frame of a pax header */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "transfer/ustar.h"

#include <string.h>

enum { SIZE_DIGITS = 11, SUM_DIGITS = 6, MAGIC_AT = 257 };

size_t firn_ustar_padded(size_t bytes)
{
    return (bytes + FIRN_USTAR_BYTES - 1) / FIRN_USTAR_BYTES * FIRN_USTAR_BYTES;
}

/* The sum of a header with its sum field taken as spaces. */
static uint32_t sum_of(const uint8_t *header)
{
    uint32_t sum = 8 * ' ';

    for (unsigned i = 0; i < FIRN_USTAR_BYTES; i++)
        if (i < FIRN_USTAR_SUM_AT || i >= FIRN_USTAR_SUM_AT + 8)
            sum += header[i];
    return sum;
}

/* Octal digits, ended by a space, a NUL or the end of the field. */
static bool read_octal(const uint8_t *field, unsigned room, uint64_t *value)
{
    unsigned at = 0;

    *value = 0;
    while (at < room && field[at] >= '0' && field[at] <= '7')
        *value = *value << 3 | (uint64_t)(field[at++] - '0');
    return at > 0 && (at == room || field[at] == ' ' || field[at] == '\0');
}

static void write_octal(uint8_t *field, unsigned digits, uint64_t value)
{
    while (digits > 0) {
        field[--digits] = (uint8_t)('0' + (value & 7));
        value >>= 3;
    }
}

static bool is_header(const uint8_t *header)
{
    uint64_t sum;

    return memcmp(header + MAGIC_AT, "ustar\0" "00", 8) == 0 && read_octal(header + FIRN_USTAR_SUM_AT, 8, &sum)
        && sum == sum_of(header);
}

void firn_ustar_set_size(uint8_t *header, size_t size)
{
    write_octal(header + FIRN_USTAR_SIZE_AT, SIZE_DIGITS, size);
    write_octal(header + FIRN_USTAR_SUM_AT, SUM_DIGITS, sum_of(header));
    header[FIRN_USTAR_SUM_AT + SUM_DIGITS] = '\0';
    header[FIRN_USTAR_SUM_AT + SUM_DIGITS + 1] = ' ';
}

static bool key_is(const uint8_t *key, size_t bytes, const char *word)
{
    return bytes == strlen(word) && memcmp(key, word, bytes) == 0;
}

static bool is_name(const uint8_t *key, size_t bytes)
{
    return key_is(key, bytes, "path") || key_is(key, bytes, "linkpath") || key_is(key, bytes, "uname")
        || key_is(key, bytes, "gname");
}

/* Maps of sparse files stand in the item's extents; in the header they would send libarchive into the content. */
static bool is_map(const uint8_t *key, size_t bytes)
{
    static const char prefix[] = "GNU.sparse.";

    return (bytes >= sizeof prefix - 1 && memcmp(key, prefix, sizeof prefix - 1) == 0)
        || key_is(key, bytes, "SCHILY.realsize");
}

static bool take_record(const uint8_t *key, size_t bytes, struct firn_ustar_layout *layout)
{
    const uint8_t *equals = memchr(key, '=', bytes);
    size_t key_bytes = equals == NULL ? 0 : (size_t)(equals - key);

    if (key_bytes == 0 || is_map(key, key_bytes))
        return false;
    if (is_name(key, key_bytes))
        for (const uint8_t *at = equals + 1; at < key + bytes; at++) {
            if (*at == '\0')
                return false;
            layout->foreign_names |= *at >= 0x80;
        }
    if (key_is(key, key_bytes, "hdrcharset"))
        layout->binary = key_is(equals + 1, bytes - key_bytes - 1, "BINARY");
    return true;
}

/* "length key=value\n", where length counts all of it. */
static bool take_records(const uint8_t *at, size_t left, struct firn_ustar_layout *layout)
{
    while (left > 0) {
        size_t length = 0, digits = 0;

        while (digits < left && at[digits] >= '0' && at[digits] <= '9' && digits < 8)
            length = 10 * length + (size_t)(at[digits++] - '0');
        if (digits == 0 || digits >= left || at[digits] != ' ' || length > left || length < digits + 2)
            return false;
        if (at[length - 1] != '\n' || !take_record(at + digits + 1, length - digits - 2, layout))
            return false;
        at += length;
        left -= length;
    }
    return true;
}

enum firn_status firn_ustar_check(const uint8_t *bytes, size_t count, struct firn_ustar_layout *layout)
{
    uint64_t size;
    const uint8_t *last;

    *layout = (struct firn_ustar_layout){ 0 };
    if (count < FIRN_USTAR_BYTES || count % FIRN_USTAR_BYTES != 0 || !is_header(bytes))
        return FIRN_BAD_DATA;
    last = bytes + count - FIRN_USTAR_BYTES;
    if (last != bytes) {
        if (bytes[FIRN_USTAR_TYPE_AT] != 'x' || !read_octal(bytes + FIRN_USTAR_SIZE_AT, 12, &size) || size > count
            || firn_ustar_padded((size_t)size) + 2 * FIRN_USTAR_BYTES != count || !is_header(last))
            return FIRN_BAD_DATA;
        layout->records_bytes = (size_t)size;
        if (!take_records(bytes + FIRN_USTAR_BYTES, layout->records_bytes, layout))
            return FIRN_BAD_DATA;
    }
    if (last[FIRN_USTAR_TYPE_AT] < '0' || last[FIRN_USTAR_TYPE_AT] > '6')
        return FIRN_BAD_DATA;
    return FIRN_OK;
}
