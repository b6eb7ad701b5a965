/* desk/forecast_chart.c - the table of a forecast as a chart: on the terminal, and as a page to print */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "desk/forecast_chart.h"

#include "desk/drawing.h"
#include "desk/trouble.h"

#include <math.h>
#include <string.h>

static const double ln_ten = 2.302585092994045684;

enum { LEAST_POWER = -24, LEAST_SPAN = 4, BELOW_SPAN = 8, CURVES_MAX = FIRN_FORECAST_CHOICES + 1 };

/* Points across and up, as logarithms to base ten; -INFINITY up is a chance of nought. */
struct curve {
    double x[FIRN_FORECAST_CHOICES], y[FIRN_FORECAST_CHOICES];
    char name[FIRN_FORECAST_VIEW_ROOM];
};

struct chart {
    const struct firn_forecast_view *f;
    unsigned points, reserves;
    struct curve curves[CURVES_MAX];      /* the reserves, then the media */
    double left, right, bottom;           /* top is 0: certainty */
    double target;                        /* -INFINITY: none */
    char target_name[FIRN_FORECAST_VIEW_ROOM + 8];
};

static void make_curves(struct chart *c)
{
    const struct firn_forecast_table *t = c->f->table;

    c->points = t->interval_count;
    c->reserves = t->reserve_count;
    for (unsigned i = 0; i <= c->reserves; i++) {
        struct curve *curve = &c->curves[i];

        if (i < c->reserves)
            firn_forecast_view_percent(c->f->percents[i], curve->name);
        else
            memcpy(curve->name, "all media", sizeof "all media");
        for (unsigned j = 0; j < c->points; j++) {
            double years = fmin(t->intervals[j], c->f->plan->years);

            curve->x[j] = log10(years);
            curve->y[j] = (i < c->reserves ? t->cells[i][j].ln_rows : t->ln_medium[j]) / ln_ten;
        }
    }
}

/* Down to the least chance there is, but not so far below target and lost media that the upper part is squeezed. */
static void make_range(struct chart *c)
{
    char words[FIRN_FORECAST_VIEW_ROOM];
    double matters;

    c->left = c->curves[0].x[0];
    c->right = c->curves[0].x[c->points - 1];
    if (c->right - c->left < 0.1) {      /* a single interval */
        c->left -= 0.05;
        c->right += 0.05;
    }
    c->target = c->f->target > 0 ? log10(c->f->target) : -INFINITY;
    snprintf(c->target_name, sizeof c->target_name, "target %s", firn_forecast_view_chance(c->target * ln_ten, words));
    matters = isinf(c->target) ? 0 : c->target;
    c->bottom = isinf(c->target) ? 0 : c->target - 1;
    for (unsigned i = c->reserves + 1; i-- > 0;)
        for (unsigned j = 0; j < c->points; j++)
            if (!isinf(c->curves[i].y[j])) {
                matters = i == c->reserves ? fmin(matters, c->curves[i].y[j]) : matters;
                c->bottom = fmin(c->bottom, c->curves[i].y[j]);
            }
    c->bottom = fmax(c->bottom, fmax(matters - BELOW_SPAN, LEAST_POWER));
    c->bottom = fmin(4 * floor(c->bottom / 4), -LEAST_SPAN);      /* four steps of whole powers */
}

static void make(struct chart *c, const struct firn_forecast_view *f)
{
    *c = (struct chart){ .f = f };
    make_curves(c);
    make_range(c);
}

/* "1 mo", "3 y": short enough to stand close together. */
static const char *short_time(double years, char words[FIRN_FORECAST_VIEW_ROOM])
{
    char *space = strchr(firn_forecast_view_time(years, words), ' ');

    if (space != NULL)
        strcpy(space + 1, space[1] == 'm' ? "mo" : space[1] == 'y' ? "y" : "d");
    return words;
}

/* A curve's height at x, between its points along straight lines. */
static double height(const struct chart *c, const struct curve *curve, double x)
{
    unsigned j = 0;

    while (j + 2 < c->points && x > curve->x[j + 1])
        j++;
    if (c->points == 1 || x <= curve->x[j])
        return curve->y[j];
    if (x >= curve->x[j + 1])
        return curve->y[j + 1];
    if (isinf(curve->y[j]) || isinf(curve->y[j + 1]))
        return -INFINITY;
    return curve->y[j] + (curve->y[j + 1] - curve->y[j]) * (x - curve->x[j]) / (curve->x[j + 1] - curve->x[j]);
}

/* --- terminal --- */

enum { COLUMNS = 64, LINES = 17 };

static void plot_curve(const struct chart *c, char grid[LINES][COLUMNS + 1], const struct curve *curve, char mark)
{
    for (unsigned column = 0; column < COLUMNS; column++) {
        double y = height(c, curve, c->left + (c->right - c->left) * column / (COLUMNS - 1));
        double line = y / c->bottom * (LINES - 1);

        if (!isinf(y) && line <= LINES - 0.5 && grid[(unsigned)(line + 0.5)][column] == ' ')
            grid[(unsigned)(line + 0.5)][column] = mark;
    }
}

static void plot_target(const struct chart *c, char grid[LINES][COLUMNS + 1])
{
    unsigned line = (unsigned)(c->target / c->bottom * (LINES - 1) + 0.5);

    for (unsigned column = 0; column < COLUMNS; column += 2)
        if (grid[line][column] == ' ')
            grid[line][column] = '.';
}

/* The times under the axis, each under its column where there is room. */
static void plot_times(const struct chart *c, FILE *out)
{
    char line[COLUMNS + 32];
    unsigned used = 0;

    memset(line, ' ', sizeof line);
    for (unsigned j = 0; j < c->points; j++) {
        char words[FIRN_FORECAST_VIEW_ROOM];
        double share = (c->curves[0].x[j] - c->left) / (c->right - c->left);
        unsigned at = (unsigned)(share * (COLUMNS - 1));
        size_t count = strlen(short_time(c->f->table->intervals[j], words));

        at = at > count / 2 ? at - (unsigned)(count / 2) : 0;
        if (at < used || at + count >= sizeof line)
            continue;
        memcpy(line + at, words, count);
        used = at + (unsigned)count + 2;
    }
    line[used > 2 ? used - 2 : 0] = '\0';
    fprintf(out, "          %s\n", line);
}

void firn_forecast_chart_plot(const struct firn_forecast_view *f)
{
    char grid[LINES][COLUMNS + 1];
    FILE *out = f->view->out;
    struct chart c;

    make(&c, f);
    for (unsigned line = 0; line < LINES; line++) {
        memset(grid[line], ' ', COLUMNS);
        grid[line][COLUMNS] = '\0';
    }
    for (unsigned i = 0; i < c.reserves; i++)
        plot_curve(&c, grid, &c.curves[i], (char)('a' + i));
    plot_curve(&c, grid, &c.curves[c.reserves], '=');
    if (!isinf(c.target))
        plot_target(&c, grid);
    fputs("\nchance of loss by time between scrubs\n", out);
    for (unsigned line = 0; line < LINES; line++) {
        if (line == 0)
            fprintf(out, "  1      |%s\n", grid[line]);
        else if (line % 4 == 0)
            fprintf(out, "  1e%-4.3g |%s\n", c.bottom * line / (LINES - 1), grid[line]);
        else
            fprintf(out, "         |%s\n", grid[line]);
    }
    fputs("         +", out);
    for (unsigned column = 0; column < COLUMNS; column++)
        fputc('-', out);
    fputc('\n', out);
    plot_times(&c, out);
    fputs("  a row beyond its reserve:", out);
    for (unsigned i = 0; i < c.reserves; i++)
        fprintf(out, " %c %s%s", (int)('a' + i), c.curves[i].name, i + 1 < c.reserves ? "," : "\n");
    fprintf(out, "  = every copy's medium lost%s; the chance of any loss is the sum of the two\n",
            isinf(c.target) ? "" : "; . the target");
}

/* --- page --- */

enum { PAGE_WIDTH = 180, PAGE_HEIGHT = 122, PLOT_LEFT = 20, PLOT_RIGHT = 148, PLOT_TOP = 21, PLOT_BOTTOM = 94 };

static const struct firn_drawing_pen axis_pen = { 0.3, NULL, NULL }, grid_pen = { 0.12, NULL, "#999" },
                                     media_pen = { 1.5, NULL, "#aaa" }, target_pen = { 0.3, "0.3 1", NULL },
                                     leader_pen = { 0.12, NULL, NULL }, ring_pen = { 0.5, NULL, NULL };

/* Told apart without colour: by their dashes and by their names at the end. */
static const struct firn_drawing_pen curve_pens[] = {
    { 0.35, NULL, NULL }, { 0.5, "3 1", NULL }, { 0.4, "1 0.8", NULL }, { 0.45, "4 1 1 1", NULL },
};

static double page_x(const struct chart *c, double x)
{
    return PLOT_LEFT + (PLOT_RIGHT - PLOT_LEFT) * (x - c->left) / (c->right - c->left);
}

static double page_y(const struct chart *c, double y)
{
    return PLOT_TOP + (PLOT_BOTTOM - PLOT_TOP) * y / c->bottom;
}

static void draw_axes(const struct chart *c, struct firn_drawing *drawing)
{
    const struct firn_drawing_type small = { 3, FIRN_DRAWING_PLAIN, FIRN_DRAWING_END, 0 };
    const struct firn_drawing_type centred = { 3, FIRN_DRAWING_PLAIN, FIRN_DRAWING_MIDDLE, 0 };
    int step = c->bottom < -12 ? 4 : c->bottom < -6 ? 2 : 1;
    double free_from = 0;

    for (int power = 0; power >= (int)c->bottom; power -= step) {
        char words[24];

        snprintf(words, sizeof words, power == 0 ? "1" : "1e%d", power);
        firn_drawing_line(drawing, PLOT_LEFT, page_y(c, power), PLOT_RIGHT, page_y(c, power), &grid_pen);
        firn_drawing_words(drawing, PLOT_LEFT - 1.5, page_y(c, power) + 1, &small, words);
    }
    for (unsigned j = 0; j < c->points; j++) {
        char words[FIRN_FORECAST_VIEW_ROOM];
        double x = page_x(c, c->curves[0].x[j]), width;

        short_time(c->f->table->intervals[j], words);
        width = firn_drawing_width(&centred, words);
        firn_drawing_line(drawing, x, PLOT_TOP, x, PLOT_BOTTOM, &grid_pen);
        if (x - width / 2 < free_from)
            continue;
        firn_drawing_words(drawing, x, PLOT_BOTTOM + 5, &centred, words);
        free_from = x + width / 2 + 1;
    }
    firn_drawing_box(drawing, PLOT_LEFT, PLOT_TOP, PLOT_RIGHT - PLOT_LEFT, PLOT_BOTTOM - PLOT_TOP, NULL, &axis_pen);
}

/* The part of a curve within the chart. Returns how many points it has; the last is the curve's right end. */
static unsigned clip(const struct chart *c, const struct curve *curve, double *x, double *y)
{
    unsigned points = 0;

    for (unsigned j = 0; j < c->points; j++) {
        double up = curve->y[j];

        if (isinf(up) || up < c->bottom) {
            points = 0;
            if (isinf(up) || j + 1 == c->points || isinf(curve->y[j + 1]) || curve->y[j + 1] <= c->bottom)
                continue;
            x[points] = curve->x[j] + (curve->x[j + 1] - curve->x[j]) * (c->bottom - up) / (curve->y[j + 1] - up);
            up = c->bottom;
        } else {
            x[points] = curve->x[j];
        }
        x[points] = page_x(c, x[points]);
        y[points++] = page_y(c, up);
    }
    if (points == 1) {      /* a single interval: a stroke across its place */
        x[1] = x[0] + 2, y[1] = y[0];
        x[0] -= 2;
        points = 2;
    }
    return points;
}

struct name {
    double x, y, at;      /* where its curve ends; the height its words stand at */
    const char *words;
};

/* Names stand in order of height, none closer than a line to the next; a thin line leads to the curve. */
static void draw_names(struct firn_drawing *drawing, struct name *names, unsigned count)
{
    const struct firn_drawing_type type = { 3, FIRN_DRAWING_PLAIN, FIRN_DRAWING_START, 22 };
    const double line = 3.7;

    for (unsigned i = 1; i < count; i++)
        for (unsigned j = i; j > 0 && names[j].y < names[j - 1].y; j--) {
            struct name other = names[j];

            names[j] = names[j - 1];
            names[j - 1] = other;
        }
    for (unsigned i = 0; i < count; i++)
        names[i].at = i > 0 && names[i].y < names[i - 1].at + line ? names[i - 1].at + line : names[i].y;
    for (unsigned i = count; i-- > 0;) {
        double most = i + 1 == count ? PLOT_BOTTOM : names[i + 1].at - line;

        names[i].at = names[i].at > most ? most : names[i].at;
        firn_drawing_line(drawing, names[i].x, names[i].y, PLOT_RIGHT + 5, names[i].at, &leader_pen);
        firn_drawing_words(drawing, PLOT_RIGHT + 6, names[i].at + 1, &type, names[i].words);
    }
}

/* below: which curves lie below the chart altogether */
static void draw_curves(const struct chart *c, struct firn_drawing *drawing, bool below[CURVES_MAX])
{
    struct name names[CURVES_MAX + 1];      /* and the target */
    unsigned named = 0;

    for (unsigned i = c->reserves + 1; i-- > 0;) {      /* the broad one first, under the others */
        double x[FIRN_FORECAST_CHOICES + 1], y[FIRN_FORECAST_CHOICES + 1];
        unsigned points = clip(c, &c->curves[i], x, y);
        bool media = i == c->reserves;

        if (points == 0) {
            below[i] = true;
            continue;
        }
        firn_drawing_curve(drawing, x, y, points,
                           media ? &media_pen : &curve_pens[i % (sizeof curve_pens / sizeof curve_pens[0])]);
        names[named++] = (struct name){ x[points - 1], y[points - 1], 0, c->curves[i].name };
    }
    if (!isinf(c->target))
        names[named++] = (struct name){ PLOT_RIGHT, page_y(c, c->target), 0, c->target_name };
    draw_names(drawing, names, named);
}

static void draw_choice(const struct chart *c, struct firn_drawing *drawing)
{
    const struct firn_forecast_table *t = c->f->table;
    double y;

    if (isinf(c->target))
        return;
    firn_drawing_line(drawing, PLOT_LEFT, page_y(c, c->target), PLOT_RIGHT, page_y(c, c->target), &target_pen);
    if (!t->found)
        return;
    y = fmax(c->curves[t->best_reserve].y[t->best_interval], c->bottom);
    firn_drawing_ring(drawing, page_x(c, c->curves[0].x[t->best_interval]), page_y(c, y), 1.8, &ring_pen);
}

static void add_below(const struct chart *c, const bool below[CURVES_MAX], struct firn_text *text)
{
    bool first = true;

    for (unsigned i = 0; i <= c->reserves; i++)
        if (below[i]) {
            firn_text_add(text, "%s%s", first ? "Below the chart: " : ", ", c->curves[i].name);
            first = false;
        }
    if (!first)
        firn_text_add(text, ".");
}

static void draw_words(const struct chart *c, struct firn_drawing *drawing, const bool below[CURVES_MAX])
{
    const struct firn_drawing_type head = { 4.4, FIRN_DRAWING_BOLD, FIRN_DRAWING_START, PAGE_WIDTH - 12 };
    const struct firn_drawing_type plain = { 2.8, FIRN_DRAWING_PLAIN, FIRN_DRAWING_START, PAGE_WIDTH - 12 };
    const struct firn_drawing_type fine = { 2.6, FIRN_DRAWING_PLAIN, FIRN_DRAWING_START, PAGE_WIDTH - 12 };
    const struct firn_drawing_type centred = { 3, FIRN_DRAWING_PLAIN, FIRN_DRAWING_MIDDLE, 0 };
    const struct firn_forecast_plan *p = c->f->plan;
    char words[300], size[FIRN_TEXT_SIZE_ROOM], years[FIRN_FORECAST_VIEW_ROOM];
    struct firn_text text;

    firn_text_start(&text, words, sizeof words);
    firn_text_add(&text, "Chance of loss in %s: %s on ", firn_forecast_view_time(p->years, years),
                  firn_text_size(p->bytes, size));
    firn_text_add(&text, "%u %s, %s", p->copies, p->copies == 1 ? "copy" : "copies", c->f->profile->name);
    firn_drawing_words(drawing, 6, 9, &head, words);
    firn_drawing_words(drawing, 6, 15, &plain, "Thin lines, by reserve: a row beyond it. Broad line: every copy's "
                       "medium lost. What counts is the sum of the two.");
    firn_drawing_words(drawing, (PLOT_LEFT + PLOT_RIGHT) / 2.0, PLOT_BOTTOM + 10, &centred, "time between scrubs");
    firn_text_start(&text, words, sizeof words);
    if (c->f->table->found)
        firn_text_add(&text, "Ring: the cheapest choice that meets the target. ");
    add_below(c, below, &text);
    firn_drawing_words(drawing, 6, PLOT_BOTTOM + 17, &fine, words);
    firn_drawing_words(drawing, 6, PLOT_BOTTOM + 21, &fine, "Orders of magnitude: rates of a class, constant over the "
                       "years. Mistakes, fire, theft, ageing are not in it.");
    firn_drawing_words(drawing, 6, PLOT_BOTTOM + 25, &fine, "Your institution's policy and professional practice "
                       "decide.");
}

int firn_forecast_chart_draw(const struct firn_forecast_view *f, const char *path, bool replace)
{
    bool below[CURVES_MAX] = { false };
    struct firn_drawing drawing;
    struct chart c;

    make(&c, f);
    if (firn_drawing_start(&drawing, PAGE_WIDTH, PAGE_HEIGHT, "Chance of loss by reserve and time between scrubs") !=
        FIRN_OK)
        return firn_trouble_tell(f->view, path, FIRN_NO_MEMORY, NULL);
    draw_axes(&c, &drawing);
    draw_curves(&c, &drawing, below);
    draw_choice(&c, &drawing);
    draw_words(&c, &drawing, below);
    return firn_drawing_keep(&drawing, f->view, path, replace);
}
