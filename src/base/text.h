/*
 * base/text.h - numbers and names as people read and write them
 *
 * Room: base.
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_BASE_TEXT_H
#define FIRN_BASE_TEXT_H

#include "firn/status.h"

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

#if defined(__GNUC__)
#define FIRN_TEXT_PRINTF(string, first) __attribute__((format(printf, string, first)))
#else
#define FIRN_TEXT_PRINTF(string, first)
#endif

/* Text grows in a lent buffer, always ended by a NUL; what does not fit is left out and `cut` says so. */
struct firn_text {
    char *at;
    size_t room;      /* bytes at `at`, the NUL included; at least 1 */
    size_t used;      /* without the NUL */
    bool cut;
};

void firn_text_start(struct firn_text *text, char *at, size_t room);
void firn_text_add(struct firn_text *text, const char *format, ...) FIRN_TEXT_PRINTF(2, 3);
void firn_text_add_bytes(struct firn_text *text, const char *bytes, size_t count);

/* "317 B", "4.2 KiB", "128 MiB": IEC 80000-13 binary multiples, three digits at most. Returns `buffer`. */
enum { FIRN_TEXT_SIZE_ROOM = 16 };
const char *firn_text_size(uint64_t bytes, char buffer[FIRN_TEXT_SIZE_ROOM]);

/* "1 234 567": groups of three. Returns `buffer`. */
enum { FIRN_TEXT_COUNT_ROOM = 32 };
const char *firn_text_count(uint64_t count, char buffer[FIRN_TEXT_COUNT_ROOM]);

/* "512", "4KiB", "128MiB", "25GB", "1.5 TB": IEC and SI units to the letter. FIRN_OK or FIRN_BAD_ARGUMENT. */
enum firn_status firn_text_parse_size(const char *words, uint64_t *bytes);

/* "45s", "90min", "2h", "30d", "2w": a whole number, its unit, a blank between. FIRN_OK or FIRN_BAD_ARGUMENT. */
enum firn_status firn_text_parse_duration(const char *words, uint64_t *seconds);

/* A whole decimal number without sign, and nothing behind it. FIRN_OK or FIRN_BAD_ARGUMENT. */
enum firn_status firn_text_parse_count(const char *words, uint64_t *count);

/* Length in bytes of the valid UTF-8 character (RFC 3629) at bytes[0 .. count), or 0. */
size_t firn_text_utf8(const char *bytes, size_t count);

/*
 * A file name for a terminal: control characters, backslashes and bytes that are no UTF-8 as \n, \t, \\ or \xHH, so
 * that a name can neither move the cursor nor break a line. Nor can it turn round what is read: marks that change the
 * direction of writing (Unicode's Bidi_Control) are shown as \xHH, too.
 */
void firn_text_add_name(struct firn_text *text, const char *name);

/*
 * A JSON string with its quotes (RFC 8259). A byte that is no UTF-8 becomes U+FFFD, since JSON has no way to say it;
 * then the result is false, and whoever needs the bytes must tell them apart.
 */
bool firn_text_add_json(struct firn_text *text, const char *string);

void firn_text_add_hex(struct firn_text *text, const uint8_t *bytes, size_t count);

/* 2 * count hexadecimal digits, either case, into bytes. FIRN_OK or FIRN_BAD_ARGUMENT. */
enum firn_status firn_text_parse_hex(const char *digits, size_t count, uint8_t *bytes);

#endif
