/*
 * desk/view.h - how reports look: lines for people, JSON Lines for programs
 *
 * Room: desk. A report is a name and fields. For people each field is a line with a label; for programs the report is
 * one JSON object on one line (RFC 8259), field names in kebab-case; a name that is no UTF-8 stands in FIELD-hex too.
 * Findings are reports of their own; for people they go to standard error as one line.
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_DESK_VIEW_H
#define FIRN_DESK_VIEW_H

#include "base/text.h"

#include <stdio.h>

struct firn_view {
    FILE *out;                 /* reports; standard error when standard output carries data */
    bool json, quiet;
    const char *command;
    bool open;                 /* inside a JSON object */
};

void firn_view_make(struct firn_view *view, const char *command, bool json, bool quiet);

/* Standard output carries data from now on. */
void firn_view_yield_output(struct firn_view *view);

/* A report: begin, fields, end. heading is the first line for people, NULL for none. */
void firn_view_begin(struct firn_view *view, const char *report, const char *heading);
void firn_view_words(struct firn_view *view, const char *field, const char *label, const char *words);
void firn_view_count(struct firn_view *view, const char *field, const char *label, uint64_t count);
void firn_view_bytes(struct firn_view *view, const char *field, const char *label, uint64_t bytes);
void firn_view_hex(struct firn_view *view, const char *field, const char *label, const uint8_t *bytes, size_t count);
void firn_view_switch(struct firn_view *view, const char *field, bool yes);      /* for programs only */
void firn_view_number(struct firn_view *view, const char *field, double value);  /* for programs only */
void firn_view_end(struct firn_view *view);

/*
 * One line about one thing. For people: "firn COMMAND: PATH: WORDS" on standard error, also with --quiet. For programs:
 * a report "finding" with kind, path, words.
 */
void firn_view_finding(struct firn_view *view, const char *kind, const char *path, const char *words);

/* A line of a report for people, "PATH: WORDS"; nothing as JSON. */
void firn_view_line(struct firn_view *view, const char *path, const char *words);

/* A remark that is not worth waking anybody for; nothing with --quiet. */
void firn_view_note(struct firn_view *view, const char *kind, const char *path, const char *words);

#endif
