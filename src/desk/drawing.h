/*
 * desk/drawing.h - a page of lines, boxes and words as SVG, in millimetres, black on white
 *
 * Room: desk. SVG 1.1 (W3C), nothing but what every renderer knows. The page is made in memory and written whole.
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_DESK_DRAWING_H
#define FIRN_DESK_DRAWING_H

#include "desk/view.h"

struct firn_drawing {
    FILE *out;
    char *bytes;
    size_t count;
};

/* title: for readers that cannot see. FIRN_OK or FIRN_NO_MEMORY; with FIRN_OK keep or drop it. */
enum firn_status firn_drawing_start(struct firn_drawing *drawing, double width, double height, const char *title);

struct firn_drawing_pen {
    double width;            /* of lines; 0: no line */
    const char *dashes;      /* "1 1", or NULL */
    const char *ink;         /* NULL: black */
};

void firn_drawing_line(struct firn_drawing *drawing, double x1, double y1, double x2, double y2,
                       const struct firn_drawing_pen *pen);
void firn_drawing_curve(struct firn_drawing *drawing, const double *x, const double *y, size_t points,
                        const struct firn_drawing_pen *pen);
/* fill: a colour, or NULL for none */
void firn_drawing_box(struct firn_drawing *drawing, double x, double y, double width, double height, const char *fill,
                      const struct firn_drawing_pen *pen);
void firn_drawing_ring(struct firn_drawing *drawing, double x, double y, double radius,
                       const struct firn_drawing_pen *pen);

enum firn_drawing_face { FIRN_DRAWING_PLAIN, FIRN_DRAWING_BOLD, FIRN_DRAWING_MONO, FIRN_DRAWING_MONO_BOLD };
enum firn_drawing_anchor { FIRN_DRAWING_START, FIRN_DRAWING_MIDDLE, FIRN_DRAWING_END };

struct firn_drawing_type {
    double size;             /* of the letters, in millimetres */
    enum firn_drawing_face face;
    enum firn_drawing_anchor anchor;
    double most;             /* the widest it may become; letters are made smaller beyond that. 0: any */
};

/* words: UTF-8 without control characters */
void firn_drawing_words(struct firn_drawing *drawing, double x, double y, const struct firn_drawing_type *type,
                        const char *words);

/* About how wide words of this type become, told rather too wide. */
double firn_drawing_width(const struct firn_drawing_type *type, const char *words);

/*
 * Writes the page to path, whole or not at all; "-" is standard output. Whether it worked or not, the drawing is gone
 * afterwards. Returns an exit status, trouble told.
 */
int firn_drawing_keep(struct firn_drawing *drawing, struct firn_view *view, const char *path, bool replace);

#endif
