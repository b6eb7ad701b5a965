/* container/title.c - the title page: format-spec/title.md */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "container/title.h"

#include "base/text.h"
#include "container/record.h"
#include "firn/block.h"

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

void firn_title_layout(const struct firn_sheet_geometry *g, struct firn_text *text)
{
    firn_text_add(text,
        "Behind this page lie blocks of 4096 bytes; numbers are little-endian. A block\n"
        "is 3968 bytes of payload, 48 of tag, 80 of guard. Tag: \"FIRN\"; version (1\n"
        "byte); kind, 1 data, 2 reserve (1); k (1); m (1); id of the container (8);\n"
        "number of the block from 0 (8); t, data blocks in its sheet (4); D, rows of a\n"
        "full sheet (2); zero (2); XXH3-128 of the first 4000 bytes, low half first (16).\n"
        "\n"
        "Guard: a block is 512 words of 64 bits. The first 502 have as their labels the\n"
        "integers from 3 on that are no powers of two; the next nine, labelled 1, 2, 4\n"
        ".. 256, make the XOR of all words whose label has that bit zero; the last makes\n"
        "the XOR of all 512 zero. So one flipped bit in each of the 64 bit positions is\n"
        "found and mended (extended Hamming code).\n"
        "\n");
    if (g->m > 0)
        firn_text_add(text,
            "A full sheet is %" PRIu32 " data blocks, then %" PRIu32 " reserve blocks. Block q of a sheet\n"
            "is in row q mod %u, a Reed-Solomon code word over GF(256), polynomial 0x11D, of\n"
            "k = %u data and m = %u reserve payloads: any %u of its blocks can be lost. At\n"
            "each byte offset one polynomial of degree below %u has the value of data\n"
            "payload i at point %u+i, zero at points from %u on, and the value of reserve\n"
            "payload j at point j. A shorter last sheet has fewer rows or columns.\n",
            firn_sheet_full_data(g), firn_sheet_full_blocks(g) - firn_sheet_full_data(g), (unsigned)g->depth,
            (unsigned)g->k, (unsigned)g->m, (unsigned)g->m, 256U - g->m, (unsigned)g->m, (unsigned)g->m + g->k);
    else
        firn_text_add(text,
            "This container was made WITHOUT a reserve: a lost block cannot be rebuilt.\n");
    firn_text_add(text,
        "\n"
        "The payloads of the data blocks, end to end, are the stream: records that begin\n"
        "at multiples of 32. Record header: \"FREC\"; type (2 bytes); zero (2); length of\n"
        "the body (8); place of the header in the stream (8); low half of the XXH3-128\n"
        "of these 24 bytes (8). Types: 1 this page; 2 format specification and 3 source\n"
        "of a reader, as text; 4 catalogue entries (pax headers, POSIX.1-2001); 5 coded\n"
        "content; 6 SHA-256 of items; 7 the catalogue again; 8 colophon, text, the last.\n");
}

/*
 * What a shell has to do to get the two texts out: the payloads of the first blocks, end to end, and two cuts out of
 * them. A payload is 31 times 128 bytes, so dd needs no more than that. In a sheet of few data blocks the loop has to
 * pass over the reserve.
 */
static void put_commands(struct firn_text *text, const struct firn_sheet_geometry *g,
                         const struct firn_title_texts *texts)
{
    uint64_t specification_at = firn_record_span(FIRN_TITLE_PAGE_BYTES) + FIRN_RECORD_HEADER_BYTES;
    uint64_t reader_at = specification_at + firn_record_span(texts->specification_bytes);
    uint64_t blocks = (reader_at + texts->reader_bytes + FIRN_BLOCK_PAYLOAD_BYTES - 1) / FIRN_BLOCK_PAYLOAD_BYTES;
    uint32_t data = firn_sheet_full_data(g);

    firn_text_add(text,
        "\n"
        "HOW TO READ IT WITHOUT THE PROGRAM THAT WROTE IT\n"
        "\n"
        "It carries the specification of its format and a reader in C. In a POSIX shell,\n"
        "with this file as FILE:\n"
        "\n"
        "  n=0; while [ $n -lt %" PRIu64 " ]; do ", blocks);
    if (blocks <= data)
        firn_text_add(text, "dd if=FILE bs=128 count=31 skip=$((n*32+32))\n");
    else
        firn_text_add(text, "q=$((n/%" PRIu32 "*%" PRIu32 "+n%%%" PRIu32 "+1))\n"
            "  dd if=FILE bs=128 count=31 skip=$((q*32))\n", data, firn_sheet_full_blocks(g), data);
    firn_text_add(text,
        "  n=$((n+1)); done >stream 2>/dev/null\n"
        "  dd if=stream bs=32 skip=%" PRIu64 " | head -c %zu >specification.txt\n"
        "  dd if=stream bs=32 skip=%" PRIu64 " | head -c %zu >reader.c\n"
        "  cc -O2 -o reader reader.c && ./reader FILE\n"
        "\n"
        "This shows the tag of block 0:   od -A d -t x1 -j 8064 -N 48 FILE\n",
        specification_at / FIRN_RECORD_ALIGNMENT, texts->specification_bytes, reader_at / FIRN_RECORD_ALIGNMENT,
        texts->reader_bytes);
}

enum firn_status firn_title_write(const struct firn_writer_title *title, const struct firn_sheet_geometry *geometry,
                                  const struct firn_title_texts *texts, uint8_t page[FIRN_TITLE_PAGE_BYTES],
                                  const char **wrong)
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
    if (texts != NULL)
        put_commands(&text, geometry, texts);
    firn_text_add(&text, "\nHOW IT IS LAID OUT\n\n");
    firn_title_layout(geometry, &text);
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
