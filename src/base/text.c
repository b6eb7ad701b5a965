/* base/text.c - numbers and names as people read and write them */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "base/text.h"

#include <inttypes.h>
#include <stdarg.h>
#include <stdio.h>
#include <string.h>

void firn_text_start(struct firn_text *text, char *at, size_t room)
{
    *text = (struct firn_text){ .at = at, .room = room };
    at[0] = '\0';
}

void firn_text_add(struct firn_text *text, const char *format, ...)
{
    size_t left = text->room - text->used;
    va_list arguments;
    int wanted;

    va_start(arguments, format);
    wanted = vsnprintf(text->at + text->used, left, format, arguments);
    va_end(arguments);
    if (wanted < 0 || (size_t)wanted >= left) {
        text->cut = true;
        text->used = text->room - 1;
        return;
    }
    text->used += (size_t)wanted;
}

void firn_text_add_bytes(struct firn_text *text, const char *bytes, size_t count)
{
    size_t left = text->room - 1 - text->used;

    if (count > left) {
        count = left;
        text->cut = true;
    }
    memcpy(text->at + text->used, bytes, count);
    text->used += count;
    text->at[text->used] = '\0';
}

const char *firn_text_size(uint64_t bytes, char buffer[FIRN_TEXT_SIZE_ROOM])
{
    static const char *const units[] = { "B", "KiB", "MiB", "GiB", "TiB", "PiB", "EiB" };
    double value = (double)bytes;
    unsigned unit = 0;

    while (value >= 1023.95 && unit < 6) {      /* 1023.95 would print as 1024 */
        value /= 1024;
        unit++;
    }
    if (unit == 0)
        snprintf(buffer, FIRN_TEXT_SIZE_ROOM, "%" PRIu64 " B", bytes);
    else
        snprintf(buffer, FIRN_TEXT_SIZE_ROOM, value < 9.995 ? "%.2f %s" : value < 99.95 ? "%.1f %s" : "%.0f %s", value,
                 units[unit]);
    return buffer;
}

const char *firn_text_count(uint64_t count, char buffer[FIRN_TEXT_COUNT_ROOM])
{
    char digits[24];
    size_t length = (size_t)snprintf(digits, sizeof digits, "%" PRIu64, count);
    char *to = buffer;

    for (size_t i = 0; i < length; i++) {
        if (i > 0 && (length - i) % 3 == 0)
            *to++ = ' ';
        *to++ = digits[i];
    }
    *to = '\0';
    return buffer;
}

static const struct unit { const char *name; uint64_t bytes; } size_units[] = {
    { "", 1 }, { "B", 1 },
    { "KiB", UINT64_C(1) << 10 }, { "MiB", UINT64_C(1) << 20 }, { "GiB", UINT64_C(1) << 30 },
    { "TiB", UINT64_C(1) << 40 }, { "PiB", UINT64_C(1) << 50 },
    { "kB", 1000 }, { "KB", 1000 }, { "MB", 1000000 }, { "GB", 1000000000 }, { "TB", UINT64_C(1000000000000) },
    { "PB", UINT64_C(1000000000000000) },
};

enum firn_status firn_text_parse_size(const char *words, uint64_t *bytes)
{
    uint64_t whole = 0, thousandths = 0, scale = 1000;
    const char *at = words;

    if (*at < '0' || *at > '9')
        return FIRN_BAD_ARGUMENT;
    for (; *at >= '0' && *at <= '9'; at++) {
        if (whole > UINT64_MAX / 100)
            return FIRN_BAD_ARGUMENT;
        whole = whole * 10 + (uint64_t)(*at - '0');
    }
    if (*at == '.')
        for (at++; *at >= '0' && *at <= '9'; at++)
            if (scale > 1) {
                scale /= 10;
                thousandths += (uint64_t)(*at - '0') * scale;
            }
    while (*at == ' ')
        at++;
    for (size_t i = 0; i < sizeof size_units / sizeof size_units[0]; i++)
        if (strcmp(at, size_units[i].name) == 0) {
            if (whole > UINT64_MAX / size_units[i].bytes - 1 && size_units[i].bytes > 1)
                return FIRN_BAD_ARGUMENT;
            *bytes = whole * size_units[i].bytes + size_units[i].bytes / 1000 * thousandths
                   + size_units[i].bytes % 1000 * thousandths / 1000;
            return FIRN_OK;
        }
    return FIRN_BAD_ARGUMENT;
}

static const struct period { const char *name; uint64_t seconds; } periods[] = {
    { "s", 1 }, { "min", 60 }, { "h", 3600 }, { "d", 86400 }, { "w", 604800 },
};

enum firn_status firn_text_parse_duration(const char *words, uint64_t *seconds)
{
    uint64_t number = 0;
    const char *at = words;

    for (; *at >= '0' && *at <= '9'; at++) {
        if (number > UINT32_MAX)
            return FIRN_BAD_ARGUMENT;
        number = number * 10 + (uint64_t)(*at - '0');
    }
    if (at == words)
        return FIRN_BAD_ARGUMENT;
    while (*at == ' ')
        at++;
    for (size_t i = 0; i < sizeof periods / sizeof periods[0]; i++)
        if (strcmp(at, periods[i].name) == 0) {
            *seconds = number * periods[i].seconds;
            return FIRN_OK;
        }
    return FIRN_BAD_ARGUMENT;
}

enum firn_status firn_text_parse_count(const char *words, uint64_t *count)
{
    uint64_t value = 0;

    if (*words == '\0')
        return FIRN_BAD_ARGUMENT;
    for (const char *at = words; *at != '\0'; at++) {
        uint64_t digit = (uint64_t)(*at - '0');

        if (*at < '0' || *at > '9' || value > (UINT64_MAX - digit) / 10)
            return FIRN_BAD_ARGUMENT;
        value = value * 10 + digit;
    }
    *count = value;
    return FIRN_OK;
}

size_t firn_text_utf8(const char *bytes, size_t count)
{
    const uint8_t *at = (const uint8_t *)bytes;
    size_t length;
    uint32_t value;

    if (count == 0)
        return 0;
    if (at[0] < 0x80)
        return 1;
    length = at[0] >= 0xF0 ? 4 : at[0] >= 0xE0 ? 3 : 2;
    if (at[0] < 0xC2 || at[0] > 0xF4 || length > count)
        return 0;
    value = at[0] & (0x7FU >> length);
    for (size_t i = 1; i < length; i++) {
        if ((at[i] & 0xC0) != 0x80)
            return 0;
        value = value << 6 | (at[i] & 0x3FU);
    }
    if ((length == 3 && value < 0x800) || (length == 4 && (value < 0x10000 || value > 0x10FFFF)))
        return 0;
    return value >= 0xD800 && value <= 0xDFFF ? 0 : length;
}

/* Characters of valid UTF-8 that end a line or change its direction; nobody would see them. */
static bool bends_lines(const uint8_t *at, size_t length)
{
    static const struct { uint32_t first, last; } ranges[] = {
        { 0x80, 0x9F },                /* C1 control characters */
        { 0x61C, 0x61C },              /* Arabic letter mark */
        { 0x200E, 0x200F },            /* left-to-right and right-to-left mark */
        { 0x2028, 0x202E },            /* separators of lines and paragraphs, embeddings and overrides */
        { 0x2066, 0x2069 },            /* isolates */
    };
    uint32_t value = length < 2 ? at[0] : at[0] & (0x7FU >> length);

    for (size_t i = 1; i < length; i++)
        value = value << 6 | (at[i] & 0x3FU);
    for (size_t i = 0; i < sizeof ranges / sizeof ranges[0]; i++)
        if (value >= ranges[i].first && value <= ranges[i].last)
            return true;
    return false;
}

void firn_text_add_name(struct firn_text *text, const char *name)
{
    size_t left = strlen(name);

    while (left > 0) {
        size_t length = firn_text_utf8(name, left);
        uint8_t byte = (uint8_t)*name;

        if (byte == '\n')
            firn_text_add(text, "\\n");
        else if (byte == '\t')
            firn_text_add(text, "\\t");
        else if (byte == '\\')
            firn_text_add(text, "\\\\");
        else if (length == 0 || byte < 0x20 || byte == 0x7F || bends_lines((const uint8_t *)name, length))
            for (size_t i = 0; i < (length == 0 ? 1 : length); i++)
                firn_text_add(text, "\\x%02X", (unsigned)(uint8_t)name[i]);
        else
            firn_text_add_bytes(text, name, length);
        length = length == 0 ? 1 : length;
        name += length;
        left -= length;
    }
}

bool firn_text_add_json(struct firn_text *text, const char *string)
{
    size_t left = strlen(string);
    bool exact = true;

    firn_text_add_bytes(text, "\"", 1);
    while (left > 0) {
        size_t length = firn_text_utf8(string, left);
        uint8_t byte = (uint8_t)*string;

        if (length == 0)
            firn_text_add(text, "\\ufffd");
        else if (byte == '"' || byte == '\\')
            firn_text_add(text, "\\%c", *string);
        else if (byte < 0x20)
            firn_text_add(text, "\\u%04x", (unsigned)byte);
        else
            firn_text_add_bytes(text, string, length);
        exact = exact && length > 0;
        length = length == 0 ? 1 : length;
        string += length;
        left -= length;
    }
    firn_text_add_bytes(text, "\"", 1);
    return exact;
}

void firn_text_add_hex(struct firn_text *text, const uint8_t *bytes, size_t count)
{
    for (size_t i = 0; i < count; i++)
        firn_text_add(text, "%02x", (unsigned)bytes[i]);
}

static int hex_digit(char c)
{
    if (c >= '0' && c <= '9')
        return c - '0';
    if (c >= 'a' && c <= 'f')
        return c - 'a' + 10;
    if (c >= 'A' && c <= 'F')
        return c - 'A' + 10;
    return -1;
}

enum firn_status firn_text_parse_hex(const char *digits, size_t count, uint8_t *bytes)
{
    for (size_t i = 0; i < count; i++) {
        int high = hex_digit(digits[2 * i]);
        int low = high < 0 ? -1 : hex_digit(digits[2 * i + 1]);

        if (low < 0)
            return FIRN_BAD_ARGUMENT;
        bytes[i] = (uint8_t)(high << 4 | low);
    }
    return FIRN_OK;
}
