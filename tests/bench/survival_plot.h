/*
 * tests/bench/survival_plot.h - curves as an SVG file: theory as lines, measurement as points with their 95 % intervals
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_BENCH_SURVIVAL_PLOT_H
#define FIRN_BENCH_SURVIVAL_PLOT_H

#include <stdbool.h>

enum { PLOT_POINTS = 64, PLOT_CURVES = 8 };

struct plot_curve {
    const char *name;
    unsigned colour;                       /* curves of one layer have the same: 0 .. 4 */
    bool measured;                         /* points, not a line */
    unsigned count;
    double x[PLOT_POINTS], y[PLOT_POINTS], low[PLOT_POINTS], high[PLOT_POINTS];
};

struct plot_panel {
    const char *title, *x_words, *y_words;
    bool logarithmic;                      /* x; from and to are powers of ten then */
    double from, to;
    double limit;                          /* a line across at this x, 0: none */
    const char *limit_words;
    unsigned count;
    struct plot_curve curves[PLOT_CURVES];
};

struct plot_curve *plot_add(struct plot_panel *panel, const char *name, unsigned colour, bool measured);
void plot_point(struct plot_curve *curve, double x, double y, double low, double high);

/* Panels below each other. False when the file cannot be written. */
bool plot_write(const char *path, const struct plot_panel *panels, unsigned count);

#endif
