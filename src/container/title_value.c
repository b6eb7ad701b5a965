/* container/title_value.c - what a title page says: accession, title, custodian, note, the day it was packed */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "container/title_value.h"

#include "base/text.h"

#include <string.h>

enum { LABEL_AT = 2, VALUE_AT = 14 };      /* columns: format-spec/title.md */

/* Behind it stands the layout in words, which has no values. */
static const char end_of_values[] = "HOW IT IS LAID OUT";

struct line {
    const char *at;
    size_t count;
};

/* The next line of the page's values; false at their end. */
static bool next_line(const char *page, size_t *at, struct line *line)
{
    const char *end = memchr(page + *at, '\n', FIRN_TITLE_PAGE_BYTES - *at);

    if (end == NULL)
        return false;
    *line = (struct line){ page + *at, (size_t)(end - page) - *at };
    *at += line->count + 1;
    return line->count < sizeof end_of_values - 1 || memcmp(line->at, end_of_values, sizeof end_of_values - 1) != 0;
}

static bool is_blank(const struct line *line, size_t columns)
{
    for (size_t i = 0; i < columns; i++)
        if (i >= line->count || line->at[i] != ' ')
            return false;
    return true;
}

static bool has_label(const struct line *line, const char *label)
{
    size_t length = strlen(label);

    if (line->count < VALUE_AT || !is_blank(line, LABEL_AT) || memcmp(line->at + LABEL_AT, label, length) != 0)
        return false;
    for (size_t i = LABEL_AT + length; i < VALUE_AT; i++)
        if (line->at[i] != ' ')
            return false;
    return true;
}

static void add_value(struct firn_text *text, const struct line *line)
{
    for (size_t i = VALUE_AT, step; i < line->count; i += step) {
        step = firn_text_utf8(line->at + i, line->count - i);
        if (step == 0 || (uint8_t)line->at[i] < 0x20 || line->at[i] == 0x7F) {
            firn_text_add_bytes(text, "?", 1);
            step = 1;
        } else {
            firn_text_add_bytes(text, line->at + i, step);
        }
    }
}

enum firn_status firn_title_value_read(const uint8_t page[FIRN_TITLE_PAGE_BYTES], const char *label,
                                       char value[FIRN_TITLE_VALUE_ROOM])
{
    struct firn_text text;
    struct line line;
    bool found = false;
    size_t at = 0;

    firn_text_start(&text, value, FIRN_TITLE_VALUE_ROOM);
    while (next_line((const char *)page, &at, &line)) {
        if (found && is_blank(&line, VALUE_AT))
            add_value(&text, &line);
        else if (found)
            break;
        else if (has_label(&line, label)) {
            found = true;
            add_value(&text, &line);
        }
    }
    return !found ? FIRN_END : text.cut ? FIRN_NO_ROOM : FIRN_OK;
}
