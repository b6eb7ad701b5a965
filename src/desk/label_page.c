/* desk/label_page.c - a label as text and as a page to print */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "desk/label_page.h"

#include "care/label_bars.h"
#include "desk/drawing.h"
#include "desk/trouble.h"

#include <string.h>

enum { TEXT_COLUMNS = 56, FIELDS_MAX = 5 };

struct field {
    const char *label, *words;
};

/* The lines below the mark; returns how many there are. */
static size_t fields_of(const struct firn_label_page *page, struct field fields[FIELDS_MAX])
{
    const struct field all[FIELDS_MAX] = {
        { "accession", page->accession }, { "part", page->part }, { "date", page->date }, { "container", page->id },
        { "digest", page->digest },
    };
    size_t count = 0;

    for (size_t i = 0; i < FIELDS_MAX; i++)
        if (all[i].words[0] != '\0')
            fields[count++] = all[i];
    return count;
}

static void add_small_print(const struct firn_label_page *page, struct firn_text *text)
{
    firn_text_add(text, "last character: check, ISO/IEC 7064, %s", firn_label_system_name(page->system));
    if (page->folded)
        firn_text_add(text, "; no letters O, I");
}

/* --- lines --- */

/* How many bytes of words fit into so many columns, broken at a blank where there is one. */
static size_t fit(const char *words, size_t columns)
{
    size_t left = strlen(words), used = 0, blank = 0, column = 0;

    while (used < left) {
        size_t step = firn_text_utf8(words + used, left - used);
        size_t wide = step >= 3 && (uint8_t)words[used] >= 0xE2 ? 2 : 1;

        if (column + wide > columns)
            return blank > 0 ? blank : used;
        column += wide;
        used += step == 0 ? 1 : step;
        if (words[used - 1] == ' ')
            blank = used;
    }
    return used;
}

static size_t width_of(const char *words, size_t bytes)
{
    size_t columns = 0;

    for (size_t used = 0, step; used < bytes; used += step) {
        step = firn_text_utf8(words + used, bytes - used);
        columns += step >= 3 && (uint8_t)words[used] >= 0xE2 ? 2 : 1;
        step = step == 0 ? 1 : step;
    }
    return columns;
}

/* A line between the frame's sides: a column for the label (or none), then as many lines of words as they take. */
static void put_lines(FILE *out, const char *label, size_t label_columns, const char *words)
{
    const size_t columns = TEXT_COLUMNS - label_columns;
    bool first = true;

    do {
        size_t bytes = fit(words, columns);

        fprintf(out, "| %-*s%.*s%*s |\n", (int)label_columns, first ? label : "", (int)bytes, words,
                (int)(columns - width_of(words, bytes)), "");
        words += bytes;
        first = false;
    } while (*words != '\0');
}

static void put_rule(FILE *out)
{
    fputc('+', out);
    for (unsigned i = 0; i < TEXT_COLUMNS + 2; i++)
        fputc('-', out);
    fputs("+\n", out);
}

void firn_label_page_text(const struct firn_label_page *page, FILE *out)
{
    struct field fields[FIELDS_MAX];
    size_t count = fields_of(page, fields);
    char words[120];
    struct firn_text text;

    put_rule(out);
    put_lines(out, "", 0, page->mark);
    if (page->title[0] != '\0')
        put_lines(out, "", 0, page->title);
    put_lines(out, "", 0, "");
    for (size_t i = 0; i < count; i++)
        put_lines(out, fields[i].label, 11, fields[i].words);
    firn_text_start(&text, words, sizeof words);
    add_small_print(page, &text);
    put_lines(out, "", 0, words);
    put_rule(out);
}

/* --- page --- */

enum { PAGE_WIDTH = 100, PAGE_HEIGHT = 60, MARGIN = 5 };

/* A module no wider than is usual for hand scanners; bars centred, quiet zones kept free. */
static bool draw_bars(const struct firn_label_page *page, struct firn_drawing *drawing, double top, double height)
{
    const double most = 0.45;
    struct firn_label_bars bars;
    double module, x;

    if (firn_label_bars_make(page->mark, &bars) != FIRN_OK)
        return false;
    module = (double)(PAGE_WIDTH - 2) / (bars.modules + 2 * FIRN_LABEL_BARS_QUIET);
    module = module > most ? most : module;
    x = (PAGE_WIDTH - bars.modules * module) / 2;
    for (size_t i = 0; i < bars.count; i++) {
        if (i % 2 == 0)
            firn_drawing_box(drawing, x, top, bars.widths[i] * module, height, "black", NULL);
        x += bars.widths[i] * module;
    }
    return true;
}

/* The title on two lines at most; what does not fit ends in dots. Returns where the next line may stand. */
static double draw_title(const char *title, struct firn_drawing *drawing, double y)
{
    const struct firn_drawing_type type = { 3.3, FIRN_DRAWING_BOLD, FIRN_DRAWING_START, PAGE_WIDTH - 2 * MARGIN };
    const size_t columns = 41;      /* of the type's broad letters */

    for (unsigned line = 0; line < 2 && *title != '\0'; line++) {
        size_t bytes = fit(title, columns);
        bool cut = line == 1 && title[bytes] != '\0';
        char words[200];
        struct firn_text text;

        firn_text_start(&text, words, sizeof words);
        firn_text_add_bytes(&text, title, cut ? fit(title, columns - 1) : bytes);
        if (cut)
            firn_text_add(&text, "\xE2\x80\xA6");
        firn_drawing_words(drawing, MARGIN, y, &type, words);
        title += bytes;
        y += 4.2;
    }
    return y;
}

static void draw_fields(const struct firn_label_page *page, struct firn_drawing *drawing, double y)
{
    const struct firn_drawing_type label = { 2.4, FIRN_DRAWING_PLAIN, FIRN_DRAWING_START, 0 };
    const struct firn_drawing_type words = { 2.9, FIRN_DRAWING_MONO, FIRN_DRAWING_START, PAGE_WIDTH - 2 * MARGIN - 17 };
    const struct firn_drawing_type small = { 1.9, FIRN_DRAWING_PLAIN, FIRN_DRAWING_START, PAGE_WIDTH - 2 * MARGIN };
    struct field fields[FIELDS_MAX];
    size_t count = fields_of(page, fields);
    char line[120];
    struct firn_text text;

    for (size_t i = 0; i < count; i++) {
        firn_drawing_words(drawing, MARGIN, y, &label, fields[i].label);
        firn_drawing_words(drawing, MARGIN + 17, y, &words, fields[i].words);
        y += 3.7;
    }
    firn_text_start(&text, line, sizeof line);
    add_small_print(page, &text);
    firn_drawing_words(drawing, MARGIN, PAGE_HEIGHT - 2, &small, line);
}

int firn_label_page_draw(const struct firn_label_page *page, struct firn_view *view, const char *path, bool replace)
{
    const struct firn_drawing_type mark = { 7, FIRN_DRAWING_MONO_BOLD, FIRN_DRAWING_MIDDLE, PAGE_WIDTH - 2 * MARGIN };
    const struct firn_drawing_pen edge = { 0.2, NULL, "#888" };
    struct firn_drawing drawing;

    if (firn_drawing_start(&drawing, PAGE_WIDTH, PAGE_HEIGHT, page->mark) != FIRN_OK)
        return firn_trouble_tell(view, path, FIRN_NO_MEMORY, NULL);
    firn_drawing_box(&drawing, 0.1, 0.1, PAGE_WIDTH - 0.2, PAGE_HEIGHT - 0.2, NULL, &edge);      /* to cut along */
    draw_bars(page, &drawing, 3.5, 14);
    firn_drawing_words(&drawing, PAGE_WIDTH / 2.0, 24.5, &mark, page->mark);
    draw_fields(page, &drawing, draw_title(page->title, &drawing, 31) + 0.2);
    return firn_drawing_keep(&drawing, view, path, replace);
}

void firn_label_page_json(const struct firn_label_page *page, struct firn_view *view)
{
    const char check[2] = { page->mark[strlen(page->mark) - 1], '\0' };
    struct field fields[FIELDS_MAX];
    size_t count = fields_of(page, fields);

    firn_view_begin(view, "label", NULL);
    firn_view_words(view, "mark", NULL, page->mark);
    firn_view_words(view, "check", NULL, check);
    firn_view_words(view, "system", NULL, firn_label_system_name(page->system));
    firn_view_words(view, "title", NULL, page->title);
    for (size_t i = 0; i < count; i++)
        firn_view_words(view, fields[i].label, NULL, fields[i].words);
    firn_view_end(view);
}
