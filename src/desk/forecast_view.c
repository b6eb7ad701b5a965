/* desk/forecast_view.c - a forecast and its table, for people and as JSON */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "desk/forecast_view.h"

#include <inttypes.h>
#include <math.h>
#include <string.h>

const char firn_forecast_view_caution[] =
    "Orders of magnitude: rates of a class, constant over the years, each copy and block for itself. Mistakes,\n"
    "fire, theft, ageing are not in it. Your institution's policy and professional practice decide.\n";

static const struct { const char *field, *label; } causes[FIRN_FORECAST_CAUSES] = {
    [FIRN_FORECAST_FLIPS] = { "flips", "flips beyond the lanes alone" },
    [FIRN_FORECAST_RUNS] = { "runs", "unreadable runs alone" },
    [FIRN_FORECAST_READING] = { "read-errors", "read errors alone" },
    [FIRN_FORECAST_ROWS] = { "rows", "all three: a row beyond its reserve" },
    [FIRN_FORECAST_LAST_SHEET] = { "last-sheet", "  of it, in the short last sheet" },
    [FIRN_FORECAST_MEDIUM] = { "media", "every copy's medium lost" },
    [FIRN_FORECAST_ANY] = { "any", "anything at all" },
};

const char *firn_forecast_view_chance(double ln_chance, char words[FIRN_FORECAST_VIEW_ROOM])
{
    double digits = ln_chance / 2.302585092994045684, exponent = floor(digits), chance = exp(ln_chance);
    double mantissa = pow(10, digits - exponent);

    if (ln_chance == -INFINITY) {
        memcpy(words, "none", sizeof "none");
    } else if (chance >= 0.001) {
        snprintf(words, FIRN_FORECAST_VIEW_ROOM, "%.*f", chance >= 0.0995 ? 2 : chance >= 0.00995 ? 3 : 4, chance);
    } else {
        if (mantissa >= 9.95) {
            mantissa = 1;
            exponent += 1;
        }
        snprintf(words, FIRN_FORECAST_VIEW_ROOM, "%.1fe-%.0f", mantissa, -exponent);
    }
    return words;
}

const char *firn_forecast_view_time(double years, char words[FIRN_FORECAST_VIEW_ROOM])
{
    double months = years * 12;

    if (isinf(years))
        snprintf(words, FIRN_FORECAST_VIEW_ROOM, "never");
    else if (fabs(years - 1) < 1e-9)
        snprintf(words, FIRN_FORECAST_VIEW_ROOM, "1 year");
    else if (years > 1 || fabs(months - floor(months + 0.5)) > 1e-6)
        snprintf(words, FIRN_FORECAST_VIEW_ROOM, years > 1 ? "%.3g years" : "%.3g days",
                 years > 1 ? years : years * 365.25);
    else
        snprintf(words, FIRN_FORECAST_VIEW_ROOM, months > 1.5 ? "%.0f months" : "%.0f month", months);
    return words;
}

const char *firn_forecast_view_percent(double percent, char words[FIRN_FORECAST_VIEW_ROOM])
{
    snprintf(words, FIRN_FORECAST_VIEW_ROOM, "%.3g %%", percent);
    return words;
}

/* --- JSON --- */

static void put_chance(struct firn_view *view, const char *name, double ln_chance)
{
    char field[64];
    struct firn_text text;

    firn_text_start(&text, field, sizeof field);
    firn_text_add(&text, "chance-%s", name);
    firn_view_number(view, field, exp(ln_chance));
    if (isinf(ln_chance))
        return;
    firn_text_start(&text, field, sizeof field);
    firn_text_add(&text, "log10-chance-%s", name);
    firn_view_number(view, field, ln_chance / 2.302585092994045684);
}

/* JSON has no infinity: what is without end is left out. */
static void put_finite(struct firn_view *view, const char *field, double value)
{
    if (isfinite(value))
        firn_view_number(view, field, value);
}

static void put_plan(const struct firn_forecast_view *f)
{
    struct firn_forecast_medium medium = f->profile->medium;
    struct firn_view *view = f->view;

    firn_view_words(view, "medium", NULL, f->profile->name);
    for (unsigned figure = 0; figure < FIRN_FORECAST_FIGURES; figure++)
        firn_view_number(view, firn_forecast_figure_name(figure), *firn_forecast_figure(&medium, figure));
    firn_view_count(view, "bytes", NULL, f->plan->bytes);
    firn_view_count(view, "copies", NULL, f->plan->copies);
    firn_view_number(view, "years", f->plan->years);
    put_finite(view, "interval-years", f->plan->interval);
    firn_view_number(view, "replace-within-years", f->plan->replace);
    firn_view_number(view, "correlation", f->plan->correlation);
    firn_view_number(view, "reserve-percent", f->percent);
    firn_view_count(view, "k", NULL, f->plan->geometry.k);
    firn_view_count(view, "m", NULL, f->plan->geometry.m);
    firn_view_count(view, "depth", NULL, f->plan->geometry.depth);
}

static void result_json(const struct firn_forecast_view *f, const struct firn_forecast_result *r)
{
    struct firn_view *view = f->view;

    firn_view_begin(view, "forecast", NULL);
    put_plan(f);
    firn_view_count(view, "container-bytes", NULL, r->container_bytes);
    firn_view_count(view, "blocks", NULL, r->blocks);
    firn_view_count(view, "rows", NULL, r->rows);
    firn_view_number(view, "scrub-mended-blocks", r->mended_blocks);
    firn_view_number(view, "scrub-blocks-beyond-lanes", r->beyond_lanes);
    firn_view_number(view, "scrub-unreadable-blocks", r->bad_blocks);
    firn_view_number(view, "scrub-medium-lost", r->media);
    firn_view_number(view, "reading-error", r->reading_error);
    firn_view_number(view, "waiting", r->waiting);
    firn_view_number(view, "waiting-irregular", r->waiting_irregular);
    for (unsigned cause = 0; cause < FIRN_FORECAST_CAUSES; cause++) {
        char field[40];
        struct firn_text text;

        put_chance(view, causes[cause].field, r->ln_lost[cause]);
        firn_text_start(&text, field, sizeof field);
        firn_text_add(&text, "expected-bytes-%s", causes[cause].field);
        firn_view_number(view, field, r->lost_bytes[cause]);
    }
    if (f->plan->copies == 2)
        put_finite(view, "baker-mean-years", r->two_copies_years);
    if (f->target > 0) {
        firn_view_number(view, "target", f->target);
        firn_view_switch(view, "meets-target", exp(r->ln_lost[FIRN_FORECAST_ANY]) <= f->target);
    }
    firn_view_end(view);
}

static void table_json(const struct firn_forecast_view *f)
{
    const struct firn_forecast_table *t = f->table;
    struct firn_view *view = f->view;

    for (unsigned i = 0; i < t->reserve_count; i++)
        for (unsigned j = 0; j < t->interval_count; j++) {
            const struct firn_forecast_cell *cell = &t->cells[i][j];

            firn_view_begin(view, "choice", NULL);
            firn_view_number(view, "reserve-percent", f->percents[i]);
            firn_view_count(view, "k", NULL, t->geometries[i].k);
            firn_view_count(view, "m", NULL, t->geometries[i].m);
            put_finite(view, "interval-years", t->intervals[j]);
            put_chance(view, "any", cell->ln_lost);
            put_chance(view, "rows", cell->ln_rows);
            firn_view_number(view, "cost", cell->cost);
            if (f->target > 0) {
                firn_view_switch(view, "meets-target", cell->meets);
                firn_view_switch(view, "cheapest", t->found && i == t->best_reserve && j == t->best_interval);
            }
            firn_view_end(view);
        }
}

/* --- words --- */

/* "every year", not "every 1 year" */
static const char *each_time(double years, char words[FIRN_FORECAST_VIEW_ROOM])
{
    firn_forecast_view_time(years, words);
    return strncmp(words, "1 ", 2) == 0 ? words + 2 : words;
}

static void put_head(const struct firn_forecast_view *f, const struct firn_forecast_result *r)
{
    const struct firn_forecast_plan *p = f->plan;
    const struct firn_sheet_shape *last = &r->last_sheet;
    bool one_sheet = r->data_blocks == last->data_blocks;      /* then its rows are all there are */
    unsigned m = one_sheet ? last->m : p->geometry.m, k = one_sheet ? last->k : p->geometry.k;
    char size[FIRN_TEXT_SIZE_ROOM], whole[FIRN_TEXT_SIZE_ROOM], all[FIRN_TEXT_SIZE_ROOM];
    char years[FIRN_FORECAST_VIEW_ROOM], interval[FIRN_FORECAST_VIEW_ROOM], percent[FIRN_FORECAST_VIEW_ROOM];
    FILE *out = f->view->out;

    fprintf(out, "%s on %u %s of %s for %s, ", firn_text_size(p->bytes, size), p->copies,
            p->copies == 1 ? "copy" : "copies", f->profile->name, firn_forecast_view_time(p->years, years));
    if (p->interval > p->years)
        fputs("never scrubbed\n", out);
    else
        fprintf(out, "scrubbed every %s\n", each_time(p->interval, interval));
    if (m == 0)
        fputs("  NO reserve: a block that is lost stays lost", out);
    else
        fprintf(out, "  reserve %s: any %u of the %u blocks of a row may be lost",
                firn_forecast_view_percent(f->percent, percent), m, k + m);
    fprintf(out, "; %s a copy", firn_text_size(r->container_bytes, whole));
    if (p->copies > 1)
        fprintf(out, ", %s in all", firn_text_size(r->container_bytes * p->copies, all));
    fputs("\n\n", out);
}

static void put_expected(FILE *out, const char *label, double value)
{
    if (value > 0)
        fprintf(out, value >= 0.01 && value < 1e6 ? "  %-37s %.3g\n" : "  %-37s %.1e\n", label, value);
    else
        fprintf(out, "  %-37s none\n", label);
}

static void put_scrub(const struct firn_forecast_view *f, const struct firn_forecast_result *r)
{
    FILE *out = f->view->out;
    char chance[FIRN_FORECAST_VIEW_ROOM], other[FIRN_FORECAST_VIEW_ROOM];

    fputs("one scrub of one copy finds, on average\n", out);
    put_expected(out, "blocks that their lanes mend", r->mended_blocks);
    put_expected(out, "blocks beyond their lanes", r->beyond_lanes);
    put_expected(out, "blocks in unreadable runs", r->bad_blocks);
    fprintf(out, "  %-37s %s\n", "chance of a read error on the way",
            firn_forecast_view_chance(r->reading_error > 0 ? log(r->reading_error) : -INFINITY, chance));
    fprintf(out, "  %-37s %s\n", "chance that the medium is gone",
            firn_forecast_view_chance(r->media > 0 ? log(r->media) : -INFINITY, chance));
    if (f->plan->interval <= f->plan->years && r->waiting > 0)
        fprintf(out, "  %-37s %-10s %s if scrubs come irregularly\n", "share of blocks waiting for a scrub",
                firn_forecast_view_chance(log(r->waiting), chance),
                firn_forecast_view_chance(log(r->waiting_irregular), other));
}

/* "1 in 120": for those to whom e-03 says little */
static void put_odds(FILE *out, double ln_chance)
{
    char count[FIRN_TEXT_COUNT_ROOM];
    double odds = exp(-ln_chance);

    if (odds < 1.5 || odds > 1e12)
        return;
    /* two digits are more than such a figure has */
    if (odds >= 100) {
        double step = pow(10, floor(log10(odds)) - 1);

        odds = floor(odds / step + 0.5) * step;
    }
    fprintf(out, "   1 in %s", firn_text_count((uint64_t)(odds + 0.5), count));
}

static void put_causes(const struct firn_forecast_view *f, const struct firn_forecast_result *r)
{
    FILE *out = f->view->out;
    char chance[FIRN_FORECAST_VIEW_ROOM], bytes[FIRN_TEXT_SIZE_ROOM];

    fprintf(out, "\nlost within the time                    %-10s expected bytes\n", "chance");
    for (unsigned cause = 0; cause < FIRN_FORECAST_CAUSES; cause++) {
        double lost = r->lost_bytes[cause];

        if (cause == FIRN_FORECAST_LAST_SHEET && isinf(r->ln_lost[cause]))
            continue;
        fprintf(out, "  %-37s %-10s ", causes[cause].label, firn_forecast_view_chance(r->ln_lost[cause], chance));
        if (lost >= 0.5)
            fputs(firn_text_size((uint64_t)(lost + 0.5), bytes), out);
        else
            fputs("less than 1", out);
        if (cause == FIRN_FORECAST_ANY)
            put_odds(out, r->ln_lost[cause]);
        fputc('\n', out);
    }
    if (f->plan->copies == 2 && isfinite(r->two_copies_years))
        fprintf(out, "  %-37s %-10s if a lost medium is noticed at once\n", "two copies after Baker et al. (2006)",
                firn_forecast_view_chance(log(-expm1(-f->plan->years / r->two_copies_years)), chance));
}

static void put_assumed(const struct firn_forecast_view *f)
{
    bool first = true;

    for (unsigned figure = 0; figure < FIRN_FORECAST_FIGURES; figure++)
        if (f->profile->assumed[figure]) {
            fprintf(f->view->out, "%s%s", first ? "Assumed, published by nobody: " : ", ",
                    firn_forecast_figure_name(figure));
            first = false;
        }
    if (!first)
        fputs(".\n", f->view->out);
}

void firn_forecast_view_result(const struct firn_forecast_view *f, const struct firn_forecast_result *result)
{
    if (f->view->json) {
        result_json(f, result);
        return;
    }
    put_head(f, result);
    put_scrub(f, result);
    put_causes(f, result);
}

static void put_best(const struct firn_forecast_view *f)
{
    const struct firn_forecast_table *t = f->table;
    char target[FIRN_FORECAST_VIEW_ROOM], percent[FIRN_FORECAST_VIEW_ROOM], time[FIRN_FORECAST_VIEW_ROOM];
    FILE *out = f->view->out;
    bool media_alone = true;

    firn_forecast_view_chance(log(f->target), target);
    if (t->found) {
        fprintf(out, "\n+ meets the target of %s. * is the cheapest: reserve %s, scrubbed %s%s,\n", target,
                firn_forecast_view_percent(f->percents[t->best_reserve], percent),
                isinf(t->intervals[t->best_interval]) ? "" : "every ", each_time(t->intervals[t->best_interval], time));
        fprintf(out, "  where keeping a byte for a year costs %g and scrubbing it once %g (--prices).\n", f->prices[0],
                f->prices[1]);
        fputs("  More reserve helps the last copy that is left, and against what no model holds.\n", out);
        return;
    }
    for (unsigned j = 0; j < t->interval_count; j++)
        media_alone = media_alone && t->ln_medium[j] > t->ln_target;
    fprintf(out, "\nNothing here meets the target of %s: %s\n", target,
            media_alone ? "losing every copy's medium is likelier than that, so take more copies"
                        : "take more reserve, shorter intervals or more copies");
}

void firn_forecast_view_table(const struct firn_forecast_view *f)
{
    const struct firn_forecast_table *t = f->table;
    FILE *out = f->view->out;
    char words[FIRN_FORECAST_VIEW_ROOM];

    if (f->view->json) {
        table_json(f);
        return;
    }
    fputs("\nchance that anything is lost, by reserve and time between scrubs\n         ", out);
    for (unsigned j = 0; j < t->interval_count; j++)
        fprintf(out, "%10s", firn_forecast_view_time(t->intervals[j], words));
    fputc('\n', out);
    for (unsigned i = 0; i < t->reserve_count; i++) {
        fprintf(out, "  %6s ", firn_forecast_view_percent(f->percents[i], words));
        for (unsigned j = 0; j < t->interval_count; j++) {
            const struct firn_forecast_cell *cell = &t->cells[i][j];
            bool best = t->found && i == t->best_reserve && j == t->best_interval;

            fprintf(out, "%9s%c", firn_forecast_view_chance(cell->ln_lost, words),
                    f->target <= 0 ? ' ' : best ? '*' : cell->meets ? '+' : ' ');
        }
        fputc('\n', out);
    }
    if (f->target > 0)
        put_best(f);
    fputc('\n', out);
    put_assumed(f);
    fputs(firn_forecast_view_caution, out);
}
