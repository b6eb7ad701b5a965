/* desk/command_forecast.c - the "forecast" command: how likely it is that something will be lost, and how much */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "desk/commands.h"

#include "desk/forecast_chart.h"
#include "desk/forecast_view.h"
#include "desk/media.h"
#include "desk/opening.h"
#include "desk/trouble.h"
#include "firn/block.h"

#include <math.h>
#include <stdlib.h>
#include <string.h>

enum option {
    SIZE,
    CONTAINER,
    MEDIUM,
    FLIPS,
    RUNS,
    RUN_LENGTH,
    LOSS,
    READ_ERRORS,
    MEDIA_FILE,
    LIST_MEDIA,
    RESERVE,
    COPIES,
    YEARS,
    INTERVAL,
    REPLACE_WITHIN,
    CORRELATION,
    TARGET,
    PRICES,
    PLOT,
    CHART,
    REPLACE
};

static const struct firn_args_option options[] = {
    [SIZE] = { "size", '\0', "SIZE", "what there is to keep, coded: 2TB, 300GiB" },
    [CONTAINER] = { "container", '\0', "FILE", "take size and reserve from this container" },
    [MEDIUM] = { "medium", '\0', "NAME", "a profile; the next five change it, or stand alone" },
    [FLIPS] = { "flips", '\0', "RATE", "a bit goes wrong, per bit and year" },
    [RUNS] = { "runs", '\0', "RATE", "unreadable runs, per medium and year" },
    [RUN_LENGTH] = { "run-length", '\0', "SIZE", "mean length of such a run" },
    [LOSS] = { "loss", '\0', "RATE", "the whole medium is lost, per year" },
    [READ_ERRORS] = { "read-errors", '\0', "RATE", "unreadable sectors per bit read (datasheet)" },
    [MEDIA_FILE] = { "media-file", '\0', "FILE", "take profiles from FILE" },
    [LIST_MEDIA] = { "list-media", '\0', NULL, "show the profiles there are" },
    [RESERVE] = { "reserve", '\0', "PERCENT", "reserve on top of the data (default 14.3)" },
    [COPIES] = { "copies", '\0', "N", "copies, each on its own medium (default 1)" },
    [YEARS] = { "years", '\0', "N", "how long (default 10)" },
    [INTERVAL] = { "interval", '\0', "TIME", "between scrubs: 90d, 6mo, 1y, never (default 1y)" },
    [REPLACE_WITHIN] = { "replace-within", '\0', "TIME", "until a bad copy is made anew (default 1mo)" },
    [CORRELATION] = { "correlation", '\0', "C", "share of fates that copies share, 0 to 1 (default 0)" },
    [TARGET] = { "target", '\0', "P", "the chance that would do: mark what meets it" },
    [PRICES] = { "prices", '\0', "K:C", "keeping a byte a year : scrubbing it (default 1:1)" },
    [PLOT] = { "plot", '\0', NULL, "draw the table on the terminal too" },
    [CHART] = { "chart", '\0', "FILE", "draw it as SVG, to print; - is standard output" },
    [REPLACE] = { "replace", '\0', NULL, "FILE of --chart may be overwritten" },
};

/* All that one run needs. */
struct asking {
    const struct firn_args *args;
    struct firn_view *view;
    struct firn_forecast_view f;
    struct firn_forecast_profile profile;
    struct firn_forecast_plan plan;
    struct firn_forecast_table table;
    double percents[FIRN_FORECAST_CHOICES];
};

/* --- words --- */

/* A plain decimal number and nothing behind it; no sign, no name, no hexadecimal. */
static bool read_number(const char *words, double *value)
{
    char *end;

    if ((*words < '0' || *words > '9') && *words != '.')
        return false;
    if (strspn(words, "0123456789.eE+-") != strlen(words))
        return false;
    *value = strtod(words, &end);
    return *end == '\0' && isfinite(*value);
}

static int read_within(const struct asking *a, enum option option, double least, double most, const char *wrong,
                       double *value)
{
    const char *words = a->args->values[option];

    if (words == NULL || (read_number(words, value) && *value >= least && *value <= most))
        return FIRN_EXIT_SOUND;
    return firn_trouble_usage(a->view, words, wrong);
}

/* "90d", "12w", "6mo", "1y", "never"; a year is 365.25 days, a month its twelfth. */
static bool read_time(const char *words, double *years)
{
    static const struct { const char *name; double years; } units[] = {
        { "d", 1 / 365.25 }, { "w", 7 / 365.25 }, { "mo", 1.0 / 12 }, { "y", 1 }
    };
    size_t digits = strspn(words, "0123456789."), count = sizeof units / sizeof units[0];
    char number[32];
    double value;

    if (strcmp(words, "never") == 0) {
        *years = INFINITY;
        return true;
    }
    if (digits == 0 || digits >= sizeof number)
        return false;
    memcpy(number, words, digits);
    number[digits] = '\0';
    for (size_t i = 0; i < count; i++)
        if (strcmp(words + digits, units[i].name) == 0 && read_number(number, &value)) {
            *years = value * units[i].years;
            return true;
        }
    return false;
}

static int read_times(struct asking *a)
{
    const char *interval = a->args->values[INTERVAL], *within = a->args->values[REPLACE_WITHIN];

    a->plan.interval = 1;
    a->plan.replace = 1.0 / 12;
    if (interval != NULL && (!read_time(interval, &a->plan.interval) || !(a->plan.interval >= 1.0 / 366)))
        return firn_trouble_usage(a->view, interval, "is no time between scrubs such as 90d, 6mo, 1y, never; a day is "
                                                     "the shortest");
    if (within != NULL && (!read_time(within, &a->plan.replace) || isinf(a->plan.replace)))
        return firn_trouble_usage(a->view, within, "is no time such as 14d, 6mo, 1y");
    return FIRN_EXIT_SOUND;
}

static int read_prices(struct asking *a)
{
    const char *words = a->args->values[PRICES], *colon = words == NULL ? NULL : strchr(words, ':');
    char keep[32];

    a->f.prices[0] = a->f.prices[1] = 1;
    if (words == NULL)
        return FIRN_EXIT_SOUND;
    if (colon != NULL && (size_t)(colon - words) < sizeof keep) {
        memcpy(keep, words, (size_t)(colon - words));
        keep[colon - words] = '\0';
        if (read_number(keep, &a->f.prices[0]) && read_number(colon + 1, &a->f.prices[1]))
            return FIRN_EXIT_SOUND;
    }
    return firn_trouble_usage(a->view, words, "is no pair of prices such as 1:0.5");
}

static int read_plan(struct asking *a)
{
    const char *copies = a->args->values[COPIES];
    uint64_t count = 1;
    int exit;

    a->plan.years = 10;
    if (copies != NULL && (firn_text_parse_count(copies, &count) != FIRN_OK || count < 1 ||
                           count > FIRN_FORECAST_COPIES_MAX))
        return firn_trouble_usage(a->view, copies, "is no number of copies from 1 to 64");
    a->plan.copies = (unsigned)count;
    exit = read_within(a, YEARS, 0.1, 10000, "is no number of years from 0.1 to 10000", &a->plan.years);
    if (exit == FIRN_EXIT_SOUND)
        exit = read_within(a, CORRELATION, 0, 1, "is no share from 0 to 1", &a->plan.correlation);
    if (exit == FIRN_EXIT_SOUND)
        exit = read_within(a, TARGET, 1e-300, 1, "is no chance such as 1e-6, 1 at most", &a->f.target);
    if (exit == FIRN_EXIT_SOUND)
        exit = read_within(a, RESERVE, 0, 100, "is no percentage from 0 to 100", &a->f.percent);
    if (exit == FIRN_EXIT_SOUND)
        exit = read_times(a);
    return exit == FIRN_EXIT_SOUND ? read_prices(a) : exit;
}

/* --- the container --- */

/* Its data blocks, coded content and all, are what is to be kept; its own sheets are taken as they are. */
static int read_container(struct asking *a)
{
    const char *path = a->args->values[CONTAINER];
    const struct firn_reader_layout *layout;
    struct firn_opening opening;
    int exit = firn_opening_make(&opening, path, a->args, a->view);

    if (exit != FIRN_EXIT_SOUND)
        return exit;
    layout = firn_reader_layout_of(opening.reader);
    exit = firn_opening_remark(a->view, path, layout);
    a->plan.bytes = layout->data_blocks * FIRN_BLOCK_PAYLOAD_BYTES;
    if (!a->args->given[RESERVE]) {
        a->plan.geometry = layout->geometry;
        a->f.percent = 100.0 * layout->geometry.m / layout->geometry.k;
    }
    firn_opening_close(&opening);
    return a->plan.bytes > 0 ? FIRN_EXIT_SOUND : exit;
}

static int read_size(struct asking *a)
{
    const char *size = a->args->values[SIZE];
    int exit = FIRN_EXIT_SOUND;

    if (a->args->given[SIZE] == a->args->given[CONTAINER])
        return firn_trouble_usage(a->view, "--size", "say how much there is to keep: --size SIZE or --container FILE");
    firn_sheet_geometry_for(a->f.percent, UINT64_C(128) << 20, &a->plan.geometry);
    if (size == NULL)
        exit = read_container(a);
    else if (firn_text_parse_size(size, &a->plan.bytes) != FIRN_OK || a->plan.bytes == 0 ||
             a->plan.bytes > UINT64_C(1) << 60)
        return firn_trouble_usage(a->view, size, "is no size such as 2TB, up to 1024PiB");
    return exit;
}

/* --- the medium --- */

static int read_rates(struct asking *a)
{
    for (unsigned figure = 0; figure < FIRN_FORECAST_FIGURES; figure++) {
        const char *words = a->args->values[FLIPS + figure];
        double value = 0;
        uint64_t bytes;
        bool read = true;

        if (words == NULL)
            continue;
        if (FLIPS + figure != RUN_LENGTH)
            read = read_number(words, &value);
        else if (firn_text_parse_size(words, &bytes) == FIRN_OK)
            value = (double)bytes;
        if (!read || !firn_forecast_figure_valid(figure, value))
            return firn_trouble_usage(a->view, words, FLIPS + figure == RUN_LENGTH
                                                          ? "is no length of a run: 512 or more, such as 64KiB"
                                                          : "is no rate such as 1e-9");
        *firn_forecast_figure(&a->profile.medium, figure) = value;
        a->profile.given[figure] = true;
        a->profile.assumed[figure] = false;
    }
    return FIRN_EXIT_SOUND;
}

static bool has_rates(const struct asking *a)
{
    for (unsigned figure = 0; figure < FIRN_FORECAST_FIGURES; figure++)
        if (a->args->given[FLIPS + figure])
            return true;
    return false;
}

static int read_medium(struct asking *a)
{
    const char *name = a->args->values[MEDIUM];
    struct firn_media media;
    int exit;

    a->profile = (struct firn_forecast_profile){ .name = "a medium as told", .medium.run_bytes = 512 };
    if (name == NULL) {
        if (!has_rates(a))
            return firn_trouble_usage(a->view, "--medium", "name a profile (--list-media shows them), or give rates");
        return read_rates(a);
    }
    exit = firn_media_read(&media, a->args->values[MEDIA_FILE], a->view);
    if (exit != FIRN_EXIT_SOUND)
        return exit;
    exit = firn_media_find(&media, name, a->view, &a->profile);
    firn_media_free(&media);
    return exit == FIRN_EXIT_SOUND ? read_rates(a) : exit;
}

static int list_media(struct asking *a)
{
    struct firn_media media;
    int exit = firn_media_read(&media, a->args->values[MEDIA_FILE], a->view);

    if (exit != FIRN_EXIT_SOUND)
        return exit;
    exit = firn_media_list(&media, a->view);
    firn_media_free(&media);
    return exit;
}

/* --- the table --- */

/* Puts one more into a list that is kept in order; what is there already is not put in again. */
static void insert(double *list, unsigned *count, double value)
{
    unsigned at = *count;

    for (unsigned i = 0; i < *count; i++)
        if (fabs(list[i] - value) < 0.02 * value)
            return;
    for (; at > 0 && list[at - 1] > value; at--)
        list[at] = list[at - 1];
    list[at] = value;
    (*count)++;
}

/* The usual choices, and the one that was asked about. Fewer columns than places: they must fit a terminal. */
static void make_table(struct asking *a)
{
    static const double reserves[] = { 0, 2, 5, 10, 14.3, 20, 33, 50 }, intervals[] = { 1.0 / 12, 0.25, 0.5, 1, 2, 5 };
    struct firn_forecast_table *t = &a->table;

    insert(a->percents, &t->reserve_count, a->f.percent);
    for (size_t i = 0; i < sizeof reserves / sizeof reserves[0]; i++)
        insert(a->percents, &t->reserve_count, reserves[i]);
    for (unsigned i = 0; i < t->reserve_count; i++)
        if (a->percents[i] < a->f.percent || a->percents[i] > a->f.percent)
            firn_sheet_geometry_for(a->percents[i], UINT64_C(128) << 20, &t->geometries[i]);
        else
            t->geometries[i] = a->plan.geometry;
    if (a->plan.interval < a->plan.years)
        insert(t->intervals, &t->interval_count, a->plan.interval);
    for (size_t i = 0; i < sizeof intervals / sizeof intervals[0] && t->interval_count < 6; i++)
        if (intervals[i] < a->plan.years)
            insert(t->intervals, &t->interval_count, intervals[i]);
    t->intervals[t->interval_count++] = INFINITY;
    t->ln_target = a->f.target > 0 ? log(a->f.target) : -INFINITY;
    t->keep = a->f.prices[0];
    t->check = a->f.prices[1];
}

static int show(struct asking *a)
{
    const struct firn_args *args = a->args;
    struct firn_forecast_result result;
    enum firn_status status = firn_forecast_run(&a->profile.medium, &a->plan, &result);
    const char *chart = args->values[CHART];

    if (status == FIRN_OK)
        status = firn_forecast_table_fill(&a->profile.medium, &a->plan, &a->table);
    if (status != FIRN_OK)
        return firn_trouble_tell(a->view, "forecast", status, NULL);
    if (chart != NULL && strcmp(chart, "-") == 0)
        firn_view_yield_output(a->view);
    if (a->view->json || !a->view->quiet) {
        firn_forecast_view_result(&a->f, &result);
        firn_forecast_view_table(&a->f);
    }
    if (args->given[PLOT] && !a->view->json && !a->view->quiet)
        firn_forecast_chart_plot(&a->f);
    return chart != NULL ? firn_forecast_chart_draw(&a->f, chart, args->given[REPLACE]) : FIRN_EXIT_SOUND;
}

static int run(const struct firn_args *args, struct firn_view *view)
{
    struct asking a = { .args = args, .view = view };
    int exit;

    a.f = (struct firn_forecast_view){ .view = view, .profile = &a.profile, .plan = &a.plan, .percent = 14.3,
                                       .table = &a.table, .percents = a.percents };
    if (args->operand_count > 0)
        return firn_trouble_usage(view, args->operands[0], "is not wanted here; a container goes behind --container");
    if (args->given[LIST_MEDIA])
        return list_media(&a);
    exit = read_plan(&a);
    if (exit == FIRN_EXIT_SOUND)
        exit = read_medium(&a);
    if (exit == FIRN_EXIT_SOUND)
        exit = read_size(&a);
    if (exit != FIRN_EXIT_SOUND)
        return exit;
    make_table(&a);
    return show(&a);
}

const struct firn_command firn_command_forecast = {
    .name = "forecast",
    .summary = "how likely it is that something will be lost, and how much",
    .usage = "--size SIZE --medium NAME [options]",
    .about = "From a medium's rates, years, copies and time between scrubs: the chance of any\n"
             "loss by cause, and a table of reserves and intervals to choose from. Datasheet\n"
             "rates are orders of magnitude, and so is the answer; mistakes, fire, theft and\n"
             "ageing are not in it. Your institution's policy and professional practice decide.\n",
    .example = "  firn forecast --size 2TB --medium disk-nearline --copies 3 --years 20 \\\n"
               "      --target 1e-3 --chart choice.svg\n",
    .options = options, .option_count = sizeof options / sizeof options[0], .run = run
};
