/* container/title.c - the title page: format-spec/title.md */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "container/title.h"

#include "base/text.h"

#include <inttypes.h>
#include <string.h>
#include <time.h>

enum { VALUE_BYTES_MAX = 512, LINE_COLUMNS = 64, LABEL_COLUMNS = 12, BLANK_COLUMNS = 80 };

static const char first_line[] = "FIRN CONTAINER, FORMAT 1\n";

static bool value_valid(const char *value)
{
    size_t left = strlen(value);

    if (left > VALUE_BYTES_MAX)
        return false;
    while (left > 0) {
        size_t length = firn_text_utf8(value, left);

        if (length == 0 || (uint8_t)*value < 0x20 || *value == 0x7F)
            return false;
        value += length;
        left -= length;
    }
    return true;
}

/* How many bytes of value fit on a line: whole characters, broken at a space where there is one. */
static size_t line_bytes(const char *value, size_t left)
{
    size_t used = 0, space = 0, columns = 0;

    while (used < left && columns < LINE_COLUMNS) {
        if (value[used] == ' ')
            space = used + 1;
        used += firn_text_utf8(value + used, left - used);
        columns++;
    }
    return used < left && space > 0 ? space : used;
}

static void put_value(struct firn_text *text, const char *label, const char *value)
{
    size_t left;

    if (value == NULL || *value == '\0')
        return;
    left = strlen(value);
    firn_text_add(text, "  %-*s", LABEL_COLUMNS, label);
    for (bool first = true; left > 0; first = false) {
        size_t step = line_bytes(value, left);

        if (!first)
            firn_text_add(text, "  %-*s", LABEL_COLUMNS, "");
        firn_text_add_bytes(text, value, step);
        firn_text_add_bytes(text, "\n", 1);
        value += step;
        left -= step;
    }
}

static void put_date(struct firn_text *text, int64_t seconds)
{
    time_t when = (time_t)seconds;
    struct tm utc;
    char words[40] = "";

    if (gmtime_r(&when, &utc) != NULL && strftime(words, sizeof words, "%Y-%m-%dT%H:%M:%SZ", &utc) > 0)
        put_value(text, "packed on", words);
    put_value(text, "packed by", "firn " FIRN_VERSION_TEXT);
}

static void put_layout(struct firn_text *text, const struct firn_sheet_geometry *g)
{
    firn_text_add(text,
        "\n"
        "HOW IT IS LAID OUT\n"
        "\n"
        "Behind this page the file is a sequence of blocks of 4096 bytes; numbers are\n"
        "little-endian. A block is 3968 bytes of payload, 48 bytes of tag and 80 bytes\n"
        "of guard. The tag: \"FIRN\"; version (1 byte); kind, 1 data, 2 reserve (1);\n"
        "k (1); m (1); id of the container (8); number of the block from 0 (8); t, data\n"
        "blocks in its sheet (4); D, rows of a full sheet (2); zero (2); XXH3-128 of the\n"
        "first 4000 bytes, low half first (16).\n"
        "\n"
        "Guard: see a block as 512 words of 64 bits. Each of the first 502 words has as\n"
        "its label the next integer from 3 on that is no power of two; the next nine\n"
        "words have 1, 2, 4 .. 256 and make the XOR of all words whose label has that\n"
        "bit zero; the last word makes the XOR of all 512 zero. So one flipped bit in\n"
        "each of the 64 bit positions is found and mended (extended Hamming code).\n"
        "\n");
    if (g->m > 0)
        firn_text_add(text,
            "A full sheet is %" PRIu32 " data blocks, then %" PRIu32 " reserve blocks. Block q of a\n"
            "sheet is in row q mod %u. A row is a Reed-Solomon code word over GF(256), field\n"
            "polynomial 0x11D, of k = %u data and m = %u reserve payloads: any %u blocks of\n"
            "a row can be lost. At each byte offset there is one polynomial of degree below\n"
            "%u with the value of data payload i at point %u+i, zero at points from %u on,\n"
            "and the value of reserve payload j at point j. A last, shorter sheet has fewer\n"
            "rows or columns.\n",
            firn_sheet_full_data(g), firn_sheet_full_blocks(g) - firn_sheet_full_data(g), (unsigned)g->depth,
            (unsigned)g->k, (unsigned)g->m, (unsigned)g->m, 256U - g->m, (unsigned)g->m, (unsigned)g->m + g->k);
    else
        firn_text_add(text,
            "This container was made WITHOUT a reserve: a lost block cannot be rebuilt.\n");
    firn_text_add(text,
        "\n"
        "The payloads of the data blocks, end to end, are the stream: records that begin\n"
        "at multiples of 32. A record header is \"FREC\"; type (2 bytes); zero (2);\n"
        "length of the body (8); place of the header in the stream (8); low half of the\n"
        "XXH3-128 of these 24 bytes (8). Types: 1 this page; 2 format specification and\n"
        "3 source of a reader, as text; 4 catalogue entries (pax headers, POSIX.1-2001);\n"
        "5 a coded stretch of content; 6 SHA-256 of items; 7 the catalogue again;\n"
        "8 colophon, text, the last record, with the totals.\n");
}

enum firn_status firn_title_write(const struct firn_writer_title *title, const struct firn_sheet_geometry *geometry,
                                  uint8_t page[FIRN_TITLE_PAGE_BYTES], const char **wrong)
{
    const struct { const char *label, *value; } values[] = {
        { "accession", title->accession }, { "title", title->title }, { "custodian", title->custodian },
        { "note", title->note }
    };
    char words[FIRN_TITLE_PAGE_BYTES];
    struct firn_text text;

    firn_text_start(&text, words, sizeof words);
    firn_text_add(&text, "%s\n"
        "This file is a collection of files, packed for long storage. It can heal small\n"
        "damage by itself, and says exactly what is lost when the damage is large. Keep\n"
        "more than one copy, in more than one place.\n\n", first_line);
    for (size_t i = 0; i < sizeof values / sizeof values[0]; i++) {
        *wrong = values[i].label;
        if (values[i].value != NULL && !value_valid(values[i].value))
            return FIRN_BAD_ARGUMENT;
        put_value(&text, values[i].label, values[i].value);
    }
    put_date(&text, title->date);
    put_layout(&text, geometry);
    *wrong = "title, custodian and note together";
    if (text.cut)
        return FIRN_BAD_ARGUMENT;
    /* what is left is blank lines of full width: a few on a screen, not two thousand */
    for (size_t i = 0; i < FIRN_TITLE_PAGE_BYTES; i++)
        page[i] = (FIRN_TITLE_PAGE_BYTES - 1 - i) % BLANK_COLUMNS == 0 ? '\n' : ' ';
    memcpy(page, words, text.used);
    *wrong = NULL;
    return FIRN_OK;
}

bool firn_title_looks_right(const uint8_t page[FIRN_TITLE_PAGE_BYTES])
{
    return memcmp(page, first_line, sizeof first_line - 1) == 0;
}
