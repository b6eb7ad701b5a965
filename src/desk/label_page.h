/*
 * desk/label_page.h - a label as text and as a page to print
 *
 * Room: desk.
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_DESK_LABEL_PAGE_H
#define FIRN_DESK_LABEL_PAGE_H

#include "desk/view.h"
#include "firn/label.h"

/* "" where there is nothing to say; UTF-8 without control characters. */
struct firn_label_page {
    char mark[FIRN_LABEL_MARK_ROOM];      /* the shelf-mark, check character and all */
    enum firn_label_system system;
    bool folded;                          /* no letter O or I in the mark */
    const char *accession, *title, *part, *date;
    char id[FIRN_LABEL_MARK_ROOM];        /* of the container, in fours, with a check character of its own */
    char digest[FIRN_LABEL_MARK_ROOM];    /* the beginning of its catalogue's SHA-256, likewise */
};

/* For a page that is printed as it is, and for somebody who writes it on the box by hand. */
void firn_label_page_text(const struct firn_label_page *page, FILE *out);

/* As SVG, 100 by 60 mm, with the mark as bars. Returns an exit status, trouble told. */
int firn_label_page_draw(const struct firn_label_page *page, struct firn_view *view, const char *path, bool replace);

void firn_label_page_json(const struct firn_label_page *page, struct firn_view *view);

#endif
