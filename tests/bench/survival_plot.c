/*
 * tests/bench/survival_plot.c - curves as an SVG file: theory as lines, measurement as points with their 95 % intervals
 * SPDX-License-Identifier: BSD-2-Clause
 */
#include "survival_plot.h"

#include <math.h>
#include <stdio.h>

enum { WIDTH = 860, PANEL = 330, LEFT = 70, RIGHT = 640, TOP = 46, BOTTOM = 276, KEY = 660 };

static const char *const colours[] = { "#7a5230", "#2f6f8f", "#8a2f5f", "#2f7f4f", "#606060" };

struct plot_curve *plot_add(struct plot_panel *panel, const char *name, unsigned colour, bool measured)
{
    struct plot_curve *curve = &panel->curves[panel->count++];

    *curve = (struct plot_curve){ .name = name, .colour = colour, .measured = measured };
    return curve;
}

void plot_point(struct plot_curve *curve, double x, double y, double low, double high)
{
    curve->x[curve->count] = x;
    curve->y[curve->count] = y;
    curve->low[curve->count] = low;
    curve->high[curve->count++] = high;
}

static double across(const struct plot_panel *panel, double x)
{
    double part = panel->logarithmic ? log10(x / panel->from) / log10(panel->to / panel->from)
                                     : (x - panel->from) / (panel->to - panel->from);

    return LEFT + part * (RIGHT - LEFT);
}

static double down(double y)
{
    return BOTTOM - y * (BOTTOM - TOP);
}

static void draw_tick(FILE *file, const struct plot_panel *panel, double x)
{
    fprintf(file, "<path class=\"grid\" d=\"M%.1f %d V%d\"/>", across(panel, x), TOP, BOTTOM);
    fprintf(file, panel->logarithmic ? "<text x=\"%.1f\" y=\"%d\" text-anchor=\"middle\">%.0e</text>\n"
                                     : "<text x=\"%.1f\" y=\"%d\" text-anchor=\"middle\">%.3g</text>\n",
            across(panel, x), BOTTOM + 16, x);
}

static void draw_frame(FILE *file, const struct plot_panel *panel)
{
    fprintf(file, "<text x=\"%d\" y=\"%d\" class=\"title\">%s</text>\n", LEFT, TOP - 16, panel->title);
    for (int i = 0; i <= 4; i++) {
        double y = i / 4.0;

        fprintf(file, "<path class=\"grid\" d=\"M%d %.1f H%d\"/>", LEFT, down(y), RIGHT);
        fprintf(file, "<text x=\"%d\" y=\"%.1f\" text-anchor=\"end\">%.2f</text>\n", LEFT - 6, down(y) + 4, y);
    }
    if (panel->logarithmic)
        for (double x = panel->from; x < panel->to * 1.01; x *= 10)
            draw_tick(file, panel, x);
    else
        for (int i = 0; i <= 5; i++)
            draw_tick(file, panel, panel->from + i * (panel->to - panel->from) / 5);
    fprintf(file, "<text x=\"%d\" y=\"%d\" text-anchor=\"middle\">%s</text>\n", (LEFT + RIGHT) / 2, BOTTOM + 34,
            panel->x_words);
    fprintf(file, "<text transform=\"translate(18 %d) rotate(-90)\" text-anchor=\"middle\">%s</text>\n",
            (TOP + BOTTOM) / 2, panel->y_words);
    if (panel->limit > 0)
        fprintf(file, "<path class=\"limit\" d=\"M%.1f %d V%d\"/>"
                "<text x=\"%.1f\" y=\"%d\" text-anchor=\"end\">%s</text>\n",
                across(panel, panel->limit), TOP, BOTTOM, across(panel, panel->limit) - 4, BOTTOM - 8,
                panel->limit_words);
}

static void draw_curve(FILE *file, const struct plot_panel *panel, const struct plot_curve *curve, unsigned place)
{
    const char *colour = colours[curve->colour];
    const int key = TOP + 10 + 18 * (int)place;

    if (curve->measured) {
        for (unsigned i = 0; i < curve->count; i++)
            fprintf(file, "<path stroke=\"%s\" d=\"M%.1f %.1f V%.1f\"/>"
                    "<circle fill=\"%s\" cx=\"%.1f\" cy=\"%.1f\" r=\"3\"/>\n",
                    colour, across(panel, curve->x[i]), down(curve->low[i]), down(curve->high[i]), colour,
                    across(panel, curve->x[i]), down(curve->y[i]));
        fprintf(file, "<circle fill=\"%s\" cx=\"%d\" cy=\"%d\" r=\"3\"/>", colour, KEY + 10, key - 4);
    } else {
        fprintf(file, "<path fill=\"none\" stroke=\"%s\" stroke-width=\"1.5\" d=\"", colour);
        for (unsigned i = 0; i < curve->count; i++)
            fprintf(file, "%c%.1f %.1f ", i == 0 ? 'M' : 'L', across(panel, curve->x[i]), down(curve->y[i]));
        fprintf(file, "\"/>\n<path stroke=\"%s\" stroke-width=\"1.5\" d=\"M%d %d h20\"/>", colour, KEY, key - 4);
    }
    fprintf(file, "<text x=\"%d\" y=\"%d\">%s</text>\n", KEY + 26, key, curve->name);
}

bool plot_write(const char *path, const struct plot_panel *panels, unsigned count)
{
    FILE *file = fopen(path, "w");
    bool failed;

    if (file == NULL)
        return false;
    fprintf(file, "<svg xmlns=\"http://www.w3.org/2000/svg\" viewBox=\"0 0 %d %u\" "
            "font-family=\"sans-serif\" font-size=\"12\">\n"
            "<style>.grid { stroke: #ddd } .limit { stroke: #333; stroke-dasharray: 5 4 } "
            ".title { font-weight: bold }</style>\n"
            "<rect width=\"100%%\" height=\"100%%\" fill=\"white\"/>\n", WIDTH, PANEL * count);
    for (unsigned i = 0; i < count; i++) {
        fprintf(file, "<g transform=\"translate(0 %u)\">\n", PANEL * i);
        draw_frame(file, &panels[i]);
        for (unsigned c = 0; c < panels[i].count; c++)
            draw_curve(file, &panels[i], &panels[i].curves[c], c);
        fprintf(file, "</g>\n");
    }
    fprintf(file, "</svg>\n");
    failed = ferror(file) != 0;
    return fclose(file) == 0 && !failed;
}
