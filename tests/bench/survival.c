/*
 * tests/bench/survival.c - survival curves: damage against the fraction of rows that come back whole, and what is lost
 *
 * usage: survival_curves [--trials N] [--seed N] [--svg FILE]
 *
 * Rows of default settings (224 + 32 blocks) are written, spoilt at a rate, and given to each layer alone; beside
 * what was measured stands what the binomial distribution says. A sheet has 128 rows: what a row survives with
 * probability s, a full sheet does with s^128. Wherever a layer calls anything good that is not what was written, the
 * program says so and fails. SPDX-License-Identifier: BSD-2-Clause
 */
#include "survival_plot.h"
#include "survival_row.h"
#include "survival_theory.h"

#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

enum { LINE_POINTS = 60, ROWS_A_SHEET = 128 };
enum layer { LANES, RESERVE, COLUMNS, RESCUE, LAYERS };

struct survey {
    struct row *row;
    unsigned trials, wrong;
};

/* What came of all trials at one amount of damage. */
struct tally {
    unsigned whole[LAYERS];      /* rows, in the order of the enum */
    double lost[LAYERS];         /* mean part of the data */
    double mended;               /* mean part of the blocks that their own lanes brought back */
};

static void add(struct tally *tally, enum layer layer, struct row_outcome outcome, unsigned trials)
{
    tally->whole[layer] += outcome.whole;
    tally->lost[layer] += outcome.lost / trials;
}

static void add_all(struct survey *survey, struct tally *tally)
{
    const struct row_outcomes outcomes = row_bring_back(survey->row);

    add(tally, LANES, outcomes.lanes, survey->trials);
    add(tally, RESERVE, outcomes.reserve, survey->trials);
    add(tally, COLUMNS, outcomes.columns, survey->trials);
    add(tally, RESCUE, outcomes.rescue, survey->trials);
    tally->mended += (double)outcomes.blocks_mended / ROW_N / survey->trials;
    survey->wrong += outcomes.wrong;
}

static void put_measured(struct plot_curve *curve, double x, unsigned found, unsigned trials)
{
    double low, high;

    theory_interval(found, trials, &low, &high);
    plot_point(curve, x, (double)found / trials, low, high);
}

/* --- flips --- */

static const double flip_rates[] = {
    1e-6, 5e-6, 1e-5, 2e-5, 3e-5, 4e-5, 6e-5, 8e-5, 1e-4, 1.2e-4, 1.5e-4, 2e-4, 3e-4, 1e-3, 2e-3, 2.5e-3, 3e-3,
    3.5e-3, 4e-3, 5e-3, 6e-3, 7e-3, 7.5e-3, 8e-3, 8.25e-3, 8.5e-3, 9e-3, 1e-2, 1.5e-2, 2.2e-2
};

static double row_by_lanes(double p) { return pow(theory_lanes(p), ROW_N); }
static double row_by_reserve(double p) { return theory_row(ROW_N, ROW_M, 1 - theory_lanes(p)); }
static double loss_by_lanes(double p) { return 1 - theory_lanes(p); }
static double loss_by_reserve(double p) { return theory_loss(ROW_N, ROW_M, 1 - theory_lanes(p)); }
static double row_by_columns(double p) { return theory_columns(ROW_N, ROW_M, p); }
static double loss_by_columns(double p) { return 1 - theory_column(ROW_N, ROW_M, p); }

static void draw_line(struct plot_panel *panel, const char *name, unsigned colour, double (*theory)(double))
{
    struct plot_curve *curve = plot_add(panel, name, colour, false);

    for (unsigned i = 0; i < LINE_POINTS; i++) {
        double part = (double)i / (LINE_POINTS - 1);
        double x = panel->logarithmic ? panel->from * pow(panel->to / panel->from, part)
                                      : panel->from + part * (panel->to - panel->from);

        plot_point(curve, x, theory(x), 0, 0);
    }
}

static void survey_flips(struct survey *survey, struct plot_panel *whole, struct plot_panel *loss)
{
    static const char *const names[] = { "lanes alone", "lanes and reserve", "columns, once", "rescue" };
    struct plot_curve *points[LAYERS], *lost[LAYERS];
    const double rate = (double)ROW_K * 3968 / (ROW_N * 4096.0);      /* data in what is written */

    draw_line(whole, "lanes: theory", 0, row_by_lanes);
    draw_line(whole, "reserve: theory", 1, row_by_reserve);
    draw_line(whole, "columns: theory", 2, row_by_columns);
    draw_line(loss, "lanes: theory", 0, loss_by_lanes);
    draw_line(loss, "reserve: theory", 1, loss_by_reserve);
    draw_line(loss, "columns: theory", 2, loss_by_columns);
    whole->limit = loss->limit = theory_shannon_limit(rate);
    for (unsigned i = 0; i < LAYERS; i++) {
        points[i] = plot_add(whole, names[i], i, true);
        lost[i] = plot_add(loss, names[i], i, true);
    }
    printf("FLIPPED BITS: %u rows at each rate. Fraction of rows that come back whole, and mean part of the data lost\n"
           "(columns: part of the columns). The capacity of the channel is the rate of the code, %.4f, at %.4f.\n\n"
           "%9s  %-19s  %-19s  %-19s  %-22s  %s\n%9s  %-19s  %-19s  %-19s  %-22s  %s\n",
           survey->trials, rate, whole->limit, "raw bit", "lanes alone", "lanes and reserve", "columns, once", "rescue",
           "lost after", "errors", "theory    measured", "theory    measured", "theory    measured", "measured  (95 %)",
           "lanes    reserve  columns  rescue");
    for (size_t i = 0; i < sizeof flip_rates / sizeof flip_rates[0]; i++) {
        const double p = flip_rates[i];
        struct tally t = { .mended = 0 };
        double low, high;

        for (unsigned trial = 0; trial < survey->trials; trial++) {
            row_write(survey->row);
            row_flip(survey->row, p);
            add_all(survey, &t);
        }
        for (unsigned layer = 0; layer < LAYERS; layer++) {
            put_measured(points[layer], p, t.whole[layer], survey->trials);
            plot_point(lost[layer], p, t.lost[layer], t.lost[layer], t.lost[layer]);
        }
        theory_interval(t.whole[RESCUE], survey->trials, &low, &high);
        printf("%9.2e  %-8.3g  %-9.3f  %-8.3g  %-9.3f  %-8.3g  %-9.3f  %-8.3f  %.3f..%.3f  %-8.3g %-8.3g %-8.3g %.3g\n",
               p, row_by_lanes(p), (double)t.whole[0] / survey->trials, row_by_reserve(p),
               (double)t.whole[1] / survey->trials, row_by_columns(p), (double)t.whole[2] / survey->trials,
               (double)t.whole[3] / survey->trials, low, high, t.lost[0], t.lost[1], t.lost[2], t.lost[3]);
        fflush(stdout);
    }
    printf("\nA block alone, by its lanes:  theory at 1e-5: %.5f, at 3e-5: %.5f, at 1e-4: %.5f\n\n", theory_lanes(1e-5),
           theory_lanes(3e-5), theory_lanes(1e-4));
}

/* --- losses --- */

static double row_by_losses(double p) { return theory_row(ROW_N, ROW_M, p); }
static double loss_by_losses(double p) { return theory_loss(ROW_N, ROW_M, p); }

/* Rows come back when at most m of their blocks are lost; the mean loss beyond that, by the same distribution. */
static void survey_losses(struct survey *survey, struct plot_panel *panel)
{
    struct plot_curve *points;

    draw_line(panel, "reserve: theory", 1, row_by_losses);
    points = plot_add(panel, "reserve", 1, true);
    panel->limit = (double)ROW_M / ROW_N;
    printf("LOST BLOCKS, each by itself: %u rows at each rate; at most %u of %u may be lost.\n\n"
           "%9s  %-8s  %-22s  %-22s  %s\n",
           10 * survey->trials, ROW_M, ROW_N, "lost", "theory", "measured  (95 %)", "a full sheet, theory",
           "data lost: theory, measured");
    for (double p = 0.01; p < 0.205; p += 0.01) {
        unsigned whole = 0;
        double low, high, lost = 0;

        for (unsigned trial = 0; trial < 10 * survey->trials; trial++) {
            struct row_outcomes outcomes;

            if (trial % 10 == 0)
                row_write(survey->row);
            else
                row_refresh(survey->row);
            (void)row_lose(survey->row, p);
            outcomes = row_bring_back_lost(survey->row);
            whole += outcomes.reserve.whole;
            lost += outcomes.reserve.lost / (10 * survey->trials);
            survey->wrong += outcomes.wrong;
        }
        put_measured(points, p, whole, 10 * survey->trials);
        theory_interval(whole, 10 * survey->trials, &low, &high);
        printf("%9.2f  %-8.3g  %-8.3f  %.3f..%.3f  %-22.3g  %-9.3g  %.3g\n", p, row_by_losses(p),
               (double)whole / (10 * survey->trials), low, high, pow(row_by_losses(p), ROWS_A_SHEET),
               loss_by_losses(p), lost);
    }
    printf("\n");
}

/* --- runs --- */

static double row_by_runs(double part) { return part <= (double)ROW_M / ROW_N; }

static double mixed_row(double part)
{
    const unsigned run = (unsigned)lround(part * ROW_N);

    return run > ROW_M ? 0 : theory_at_most(ROW_N - run, 0.02, ROW_M - run);
}

/*
 * A run of blocks takes its share of each row, one more at most: so the part of a row that is wiped stands for the part
 * of the sheet. Alone, and with one bit in a thousand flipped and one block in fifty lost on top of it.
 */
static void survey_runs(struct survey *survey, struct plot_panel *panel)
{
    struct plot_curve *alone, *mixed;

    draw_line(panel, "run alone: theory", 1, row_by_runs);
    draw_line(panel, "with losses: limit", 3, mixed_row);
    alone = plot_add(panel, "run alone", 1, true);
    mixed = plot_add(panel, "run, flips, losses", 3, true);
    panel->limit = (double)ROW_M / ROW_N;
    printf("RUNS of lost blocks, a part of each sheet, from any start: %u rows each. Alone, by the reserve; and with\n"
           "1e-3 flips and 2 %% of all blocks lost on top of it, by rescue. The limit is that without flips.\n\n"
           "%9s  %-18s  %-30s  %s\n%9s  %-18s  %-30s  %s\n",
           survey->trials, "run", "alone", "with flips and losses", "data lost", "", "theory   measured",
           "limit     measured  (95 %)", "alone    with");
    for (unsigned blocks = 0; blocks <= 48; blocks += blocks < 24 || blocks >= 36 ? 4 : 1) {
        const double part = (double)blocks / ROW_N;
        struct tally one = { .mended = 0 }, both = { .mended = 0 };
        double low, high;

        for (unsigned trial = 0; trial < survey->trials; trial++) {
            const unsigned first = row_random(survey->row, ROW_N);

            row_write(survey->row);
            row_wipe(survey->row, first, blocks);
            add_all(survey, &one);
            row_flip(survey->row, 1e-3);
            (void)row_lose(survey->row, 0.02);
            add_all(survey, &both);
        }
        put_measured(alone, part, one.whole[RESERVE], survey->trials);
        put_measured(mixed, part, both.whole[RESCUE], survey->trials);
        theory_interval(both.whole[RESCUE], survey->trials, &low, &high);
        printf("%8.2f%%  %-8.3g %-9.3f  %-8.3g  %-8.3f  %.3f..%.3f  %-8.3g %.3g\n", 100 * part, row_by_runs(part),
               (double)one.whole[RESERVE] / survey->trials, mixed_row(part),
               (double)both.whole[RESCUE] / survey->trials, low, high, one.lost[RESERVE],
               both.lost[RESCUE]);
        fflush(stdout);
    }
    printf("\n");
}

/* --- the whole --- */

static uint64_t number_after(int argc, char **argv, const char *name, uint64_t otherwise)
{
    for (int i = 1; i + 1 < argc; i++)
        if (strcmp(argv[i], name) == 0)
            return strtoull(argv[i + 1], NULL, 10);
    return otherwise;
}

static bool known_option(const char *word)
{
    return strcmp(word, "--trials") == 0 || strcmp(word, "--seed") == 0 || strcmp(word, "--svg") == 0;
}

int main(int argc, char **argv)
{
    static struct plot_panel panels[] = {
        { .title = "Flipped bits: rows of 224 + 32 blocks that come back whole", .x_words = "raw bit error rate",
          .y_words = "fraction of rows", .logarithmic = true, .from = 1e-6, .to = 1e-1, .limit_words = "Shannon" },
        { .title = "Flipped bits: data lost (columns: columns not solved)", .x_words = "raw bit error rate",
          .y_words = "part of the data", .logarithmic = true, .from = 1e-6, .to = 1e-1, .limit_words = "Shannon" },
        { .title = "Blocks lost at random: rows that come back whole", .x_words = "part of the blocks lost",
          .y_words = "fraction of rows", .from = 0, .to = 0.25, .limit_words = "reserve" },
        { .title = "A run of each sheet lost: rows that come back whole", .x_words = "part of the sheet in the run",
          .y_words = "fraction of rows", .from = 0, .to = 0.2, .limit_words = "reserve" }
    };
    struct survey survey = { .trials = (unsigned)number_after(argc, argv, "--trials", 40) };
    const uint64_t seed = number_after(argc, argv, "--seed", 1);
    const char *svg = NULL;

    for (int i = 1; i < argc; i += 2) {
        if (i + 1 >= argc || !known_option(argv[i]) || survey.trials == 0) {
            fputs("usage: survival_curves [--trials N] [--seed N] [--svg FILE]      N from 1 on\n", stderr);
            return 64;
        }
        if (strcmp(argv[i], "--svg") == 0)
            svg = argv[i + 1];
    }
    survey.row = row_make(seed);
    survey_flips(&survey, &panels[0], &panels[1]);
    survey_losses(&survey, &panels[2]);
    survey_runs(&survey, &panels[3]);
    row_free(survey.row);
    if (svg != NULL && !plot_write(svg, panels, sizeof panels / sizeof panels[0])) {
        perror(svg);
        return 74;
    }
    printf("blocks or columns called good that were not: %u\n", survey.wrong);
    return survey.wrong == 0 ? 0 : 1;
}
