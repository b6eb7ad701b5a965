/* desk/view.c - how reports look: lines for people, JSON Lines for programs */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "desk/view.h"

#include "desk/json.h"

#include <inttypes.h>
#include <string.h>

enum { LABEL_COLUMNS = 14, WORDS_ROOM = 32768 };      /* a name of 4095 bytes can become six times as long in JSON */

void firn_view_make(struct firn_view *view, const char *command, bool json, bool quiet)
{
    *view = (struct firn_view){ .out = stdout, .json = json, .quiet = quiet, .command = command };
}

void firn_view_yield_output(struct firn_view *view)
{
    view->out = stderr;
}

static bool shown(const struct firn_view *view)
{
    return view->json || !view->quiet;
}

static void put_field(struct firn_view *view, const char *field)
{
    fprintf(view->out, ",\"%s\":", field);
}

/* Bytes that JSON cannot say stand in a field of their own, "FIELD-hex". */
static void put_json(struct firn_view *view, const char *field, const char *words)
{
    char buffer[WORDS_ROOM];
    struct firn_text text;

    put_field(view, field);
    if (firn_json_string(view->out, words))
        return;
    firn_text_start(&text, buffer, sizeof buffer);
    firn_text_add_hex(&text, (const uint8_t *)words, strlen(words));
    fprintf(view->out, ",\"%s-hex\":\"%s\"", field, buffer);
}

static void put_name(FILE *out, const char *name)
{
    char buffer[WORDS_ROOM];
    struct firn_text text;

    firn_text_start(&text, buffer, sizeof buffer);
    firn_text_add_name(&text, name);
    fputs(buffer, out);
}

void firn_view_begin(struct firn_view *view, const char *report, const char *heading)
{
    if (view->json) {
        fprintf(view->out, "{\"report\":\"%s\"", report);
        view->open = true;
    } else if (heading != NULL && shown(view)) {
        put_name(view->out, heading);
        fputc('\n', view->out);
    }
}

void firn_view_words(struct firn_view *view, const char *field, const char *label, const char *words)
{
    if (view->json) {
        put_json(view, field, words);
    } else if (shown(view) && label != NULL) {
        fprintf(view->out, "  %-*s ", LABEL_COLUMNS, label);
        put_name(view->out, words);
        fputc('\n', view->out);
    }
}

void firn_view_count(struct firn_view *view, const char *field, const char *label, uint64_t count)
{
    char words[FIRN_TEXT_COUNT_ROOM];

    if (view->json) {
        put_field(view, field);
        fprintf(view->out, "%" PRIu64, count);
    } else if (shown(view) && label != NULL) {
        fprintf(view->out, "  %-*s %s\n", LABEL_COLUMNS, label, firn_text_count(count, words));
    }
}

void firn_view_bytes(struct firn_view *view, const char *field, const char *label, uint64_t bytes)
{
    char words[FIRN_TEXT_SIZE_ROOM];

    if (view->json) {
        put_field(view, field);
        fprintf(view->out, "%" PRIu64, bytes);
    } else if (shown(view) && label != NULL) {
        fprintf(view->out, "  %-*s %s\n", LABEL_COLUMNS, label, firn_text_size(bytes, words));
    }
}

void firn_view_hex(struct firn_view *view, const char *field, const char *label, const uint8_t *bytes, size_t count)
{
    char words[160];
    struct firn_text text;

    firn_text_start(&text, words, sizeof words);
    firn_text_add_hex(&text, bytes, count);
    firn_view_words(view, field, label, words);
}

void firn_view_switch(struct firn_view *view, const char *field, bool yes)
{
    if (!view->json)
        return;
    put_field(view, field);
    fputs(yes ? "true" : "false", view->out);
}

void firn_view_number(struct firn_view *view, const char *field, double value)
{
    if (!view->json)
        return;
    put_field(view, field);
    fprintf(view->out, "%.6g", value);
}

void firn_view_end(struct firn_view *view)
{
    if (view->json)
        fputs("}\n", view->out);
    view->open = false;
}

void firn_view_line(struct firn_view *view, const char *path, const char *words)
{
    if (view->json)
        return;
    put_name(view->out, path);
    fprintf(view->out, ": %s\n", words);
}

static void say(struct firn_view *view, const char *kind, const char *path, const char *words, const char *report)
{
    if (view->json) {
        firn_view_begin(view, report, NULL);
        firn_view_words(view, "kind", NULL, kind);
        firn_view_words(view, "path", NULL, path);
        firn_view_words(view, "words", NULL, words);
        firn_view_end(view);
        return;
    }
    fprintf(stderr, "firn %s: ", view->command);
    if (path != NULL && *path != '\0') {
        put_name(stderr, path);
        fputs(": ", stderr);
    }
    fprintf(stderr, "%s\n", words);
}

void firn_view_finding(struct firn_view *view, const char *kind, const char *path, const char *words)
{
    say(view, kind, path == NULL ? "" : path, words, "finding");
}

void firn_view_note(struct firn_view *view, const char *kind, const char *path, const char *words)
{
    if (shown(view))
        say(view, kind, path == NULL ? "" : path, words, "note");
}
