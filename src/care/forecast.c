/*
 * care/forecast.c - from rates, years and copies to the chance that something is lost (firn/forecast.h has the model)
 *
 * One interval between scrubs is worked out for one, two, ... copies that still have their medium; the whole time is
 * its intervals one after another, each beginning with sound copies, and a shorter one at the end.
 * SPDX-License-Identifier: BSD-2-Clause
 */
#include "care/forecast_outline.h"

#include "care/forecast_beside.h"
#include "care/forecast_copies.h"
#include "care/forecast_log.h"
#include "firn/block.h"

enum {
    LANES = 64,
    LANE_BITS = 512,
    BLOCK_BITS = 8 * FIRN_BLOCK_BYTES,
    SECTOR_BYTES = 512,
    SEGMENT_BYTES = 1 << 20,      /* format-spec/segment.md: what one lost block can take with it, not coded at all */
    SEGMENT_BLOCKS = (SEGMENT_BYTES + FIRN_BLOCK_PAYLOAD_BYTES - 1) / FIRN_BLOCK_PAYLOAD_BYTES + 1
};

/* Sheets of one shape: the full ones, and a short last one. */
enum { ALL_SHELVES = 0, LAST_SHELF = 1 };

struct shelf {
    struct firn_sheet_shape shape;
    double sheets;
};

/* What one interval does: natural logarithms of chances, by cause. */
struct interval {
    double ln_lost[FIRN_FORECAST_CAUSES];
    double ln_share[FIRN_FORECAST_CAUSES];      /* that a given byte is lost */
};

struct work {
    const struct firn_forecast_medium *medium;
    const struct firn_forecast_plan *plan;
    struct firn_forecast_result *result;
    struct shelf shelves[2];
    bool outline;                               /* causes that only explain are left out */
};

/* ln(1 - e^-x): an event of constant rate happens */
static double ln_happens(double x)
{
    return x > 0 ? log(-expm1(-x)) : -INFINITY;
}

/* ln P(a block has two wrong bits in some lane) */
static double ln_beyond_lanes(double flips)
{
    return firn_forecast_log_any(firn_forecast_tail(LANE_BITS, 1, ln_happens(flips)), LANES);
}

static double ln_unread(double errors_per_bit)
{
    return firn_forecast_log_any(errors_per_bit > 0 ? log(errors_per_bit) : -INFINITY, BLOCK_BITS);
}

/* How many blocks of 4096 bytes a run of sectors touches on average, wherever it begins. */
static double run_blocks(double run_bytes)
{
    return run_bytes > SECTOR_BYTES ? (run_bytes - SECTOR_BYTES) / FIRN_BLOCK_BYTES + 1 : 1;
}

static double ln_in_run(const struct work *w, double years)
{
    return ln_happens(w->medium->runs * years * run_blocks(w->medium->run_bytes) / (double)w->result->blocks);
}

/* What one medium's rows lose, by shelf. Without a reserve every block is a row of its own. */
struct row_losses {
    struct firn_forecast_row_loss shelves[2];
    double ln_both[2];      /* two rows side by side */
};

/* Damage to one medium, within an interval and till a bad copy is made anew. */
struct gathering {
    struct row_losses in, till;
    struct firn_forecast_copies_chance medium;
};

static void lose_rows(const struct work *w, double ln_alone, double ln_bad, struct row_losses *losses)
{
    for (unsigned i = 0; i < 2; i++) {
        const struct firn_sheet_shape *shape = &w->shelves[i].shape;
        struct firn_forecast_row row = { shape->k, shape->m, shape->rows, ln_alone, ln_bad,
                                         run_blocks(w->medium->run_bytes) };

        losses->shelves[i] = (struct firn_forecast_row_loss){ -INFINITY, -INFINITY };
        losses->ln_both[i] = -INFINITY;
        if (w->shelves[i].sheets <= 0)
            continue;
        if (shape->m == 0)
            row.k = 1, row.apart = 2;      /* a block is followed by the next */
        firn_forecast_row(&row, &losses->shelves[i]);
        losses->ln_both[i] = firn_forecast_beside_both(&row, losses->shelves[i].ln_row);
    }
}

/* Rows lost in every one of `kept` media, and the share of bytes that goes with them. */
static void meet_copies(const struct work *w, const struct gathering *g, unsigned first_shelf, unsigned kept,
                        double *ln_lost, double *ln_share)
{
    const struct row_losses *in = &g->in, *till = &g->till;

    *ln_lost = *ln_share = -INFINITY;
    for (unsigned i = first_shelf; i < 2; i++) {
        const struct shelf *shelf = &w->shelves[i];
        const struct firn_forecast_copies_chance row = { in->shelves[i].ln_row, till->shelves[i].ln_row };
        const struct firn_forecast_copies_chance both = { in->ln_both[i], till->ln_both[i] };
        const struct firn_forecast_copies_chance block = { in->shelves[i].ln_block, till->shelves[i].ln_block };
        double ln_row = firn_forecast_copies_lost(w->plan, &g->medium, kept, &row);
        double ln_both = firn_forecast_copies_lost(w->plan, &g->medium, kept, &both);
        double ln_block = firn_forecast_copies_lost(w->plan, &g->medium, kept, &block);
        double blocks = shelf->sheets * shelf->shape.data_blocks;

        if (shelf->sheets <= 0)
            continue;
        if (shelf->shape.m == 0)
            ln_row = firn_forecast_beside_any(ln_row, ln_both, blocks);
        else
            ln_row = firn_forecast_log_any(firn_forecast_beside_any(ln_row, ln_both, shelf->shape.rows), shelf->sheets);
        *ln_lost = firn_forecast_log_or(*ln_lost, ln_row);
        /* blocks of a segment go together; as if each for itself they tell too much, never too little */
        *ln_share = firn_forecast_log_add(*ln_share, log(blocks / (double)w->result->data_blocks) +
                                          firn_forecast_log_any(ln_block, SEGMENT_BLOCKS));
    }
}

/* The same over however many media are kept. */
static void meet_media(const struct work *w, const struct gathering *g, unsigned first_shelf, double *ln_lost,
                       double *ln_share)
{
    *ln_lost = *ln_share = -INFINITY;
    for (unsigned kept = 1; kept <= w->plan->copies; kept++) {
        double ln_kept = firn_forecast_copies_kept(w->plan, &g->medium, kept), lost, share;

        meet_copies(w, g, first_shelf, kept, &lost, &share);
        *ln_lost = firn_forecast_log_add(*ln_lost, ln_kept + lost);
        *ln_share = firn_forecast_log_add(*ln_share, ln_kept + share);
    }
}

/* Rows of one medium after damage of one kind, or of all, has gathered for `years`. */
static void gather(const struct work *w, enum firn_forecast_cause cause, double years, struct row_losses *losses)
{
    double flips = ln_beyond_lanes(w->medium->flips * years), unread = ln_unread(w->medium->read_errors);
    double bad = ln_in_run(w, years);

    switch (cause) {
    case FIRN_FORECAST_FLIPS:   lose_rows(w, flips, -INFINITY, losses); break;
    case FIRN_FORECAST_RUNS:    lose_rows(w, -INFINITY, bad, losses); break;
    case FIRN_FORECAST_READING: lose_rows(w, unread, -INFINITY, losses); break;
    default:                    lose_rows(w, firn_forecast_log_or(flips, unread), bad, losses); break;
    }
}

/* One interval between scrubs, and the time until a bad copy is made anew behind it. */
static void run_interval(const struct work *w, double years, struct interval *interval)
{
    const double till = w->plan->copies > 1 ? years + w->plan->replace : years;
    struct gathering g = { .medium = { ln_happens(w->medium->loss * years), ln_happens(w->medium->loss * till) } };

    for (enum firn_forecast_cause cause = FIRN_FORECAST_FLIPS; cause <= FIRN_FORECAST_ROWS; cause++) {
        interval->ln_lost[cause] = interval->ln_share[cause] = -INFINITY;
        if (w->outline && cause != FIRN_FORECAST_ROWS)
            continue;
        gather(w, cause, years, &g.in);
        g.till = g.in;
        if (till > years)
            gather(w, cause, till, &g.till);
        meet_media(w, &g, ALL_SHELVES, &interval->ln_lost[cause], &interval->ln_share[cause]);
        if (cause == FIRN_FORECAST_ROWS)
            meet_media(w, &g, LAST_SHELF, &interval->ln_lost[FIRN_FORECAST_LAST_SHEET],
                       &interval->ln_share[FIRN_FORECAST_LAST_SHEET]);
    }
    interval->ln_lost[FIRN_FORECAST_MEDIUM] = firn_forecast_copies_media(w->plan, &g.medium);
    interval->ln_share[FIRN_FORECAST_MEDIUM] = interval->ln_lost[FIRN_FORECAST_MEDIUM];
    /* rows are counted where a medium is left, so the two exclude each other */
    interval->ln_lost[FIRN_FORECAST_ANY] = firn_forecast_log_add(interval->ln_lost[FIRN_FORECAST_ROWS],
                                                                 interval->ln_lost[FIRN_FORECAST_MEDIUM]);
    interval->ln_share[FIRN_FORECAST_ANY] = firn_forecast_log_add(interval->ln_share[FIRN_FORECAST_ROWS],
                                                                  interval->ln_share[FIRN_FORECAST_MEDIUM]);
}

static void run_years(const struct work *w)
{
    const struct firn_forecast_plan *plan = w->plan;
    double whole = floor(plan->years / plan->interval + 1e-9);
    double rest = whole > 0 ? plan->years - whole * plan->interval : plan->years;
    struct interval full, last;
    bool has_rest = rest > 1e-9 * plan->years;

    if (whole > 0)
        run_interval(w, plan->interval, &full);
    if (has_rest)
        run_interval(w, rest, &last);
    for (unsigned cause = 0; cause < FIRN_FORECAST_CAUSES; cause++) {
        double ln_lost = -INFINITY, ln_share = -INFINITY;

        if (whole > 0) {
            ln_lost = firn_forecast_log_any(full.ln_lost[cause], whole);
            ln_share = firn_forecast_log_any(full.ln_share[cause], whole);
        }
        if (has_rest) {
            ln_lost = firn_forecast_log_or(ln_lost, last.ln_lost[cause]);
            ln_share = firn_forecast_log_or(ln_share, last.ln_share[cause]);
        }
        w->result->ln_lost[cause] = firn_forecast_log_cap(ln_lost);
        w->result->lost_bytes[cause] = (double)plan->bytes * exp(firn_forecast_log_cap(ln_share));
    }
}

/* How often one copy alone is beyond its reserve: the latent faults of the two-copy formula. */
static double latent_years(const struct work *w, double years)
{
    struct firn_forecast_plan one = *w->plan;
    struct work alone = *w;
    struct interval interval;
    double ln_rows;

    one.copies = 1;
    alone.plan = &one;
    alone.outline = true;
    run_interval(&alone, years, &interval);
    /* rows are counted where the medium is kept: given that it is */
    ln_rows = firn_forecast_log_cap(interval.ln_lost[FIRN_FORECAST_ROWS] + w->medium->loss * years);
    return years / -firn_forecast_log_not(ln_rows);
}

/* What a scrub meets, and what the published formula says of two such copies. */
static void look_around(const struct work *w)
{
    struct firn_forecast_result *r = w->result;
    const struct firn_forecast_medium *medium = w->medium;
    double years = fmin(w->plan->interval, w->plan->years), blocks = (double)r->blocks;
    double flipped = -expm1(-medium->flips * years * BLOCK_BITS), beyond = exp(ln_beyond_lanes(medium->flips * years));
    double load = years * (medium->flips * BLOCK_BITS + medium->runs * run_blocks(medium->run_bytes) / blocks);
    struct firn_forecast_two_copies two = {
        medium->loss > 0 ? 1 / medium->loss : INFINITY, latent_years(w, years),
        w->plan->replace, w->plan->replace, years / 2, 1
    };

    r->mended_blocks = blocks * (flipped - beyond);
    r->beyond_lanes = blocks * beyond;
    r->bad_blocks = blocks * exp(ln_in_run(w, years));
    r->media = -expm1(-medium->loss * years);
    r->reading_error = firn_forecast_read_error((double)r->blocks * FIRN_BLOCK_BYTES, medium->read_errors);
    r->waiting = firn_forecast_waiting(load, true);
    r->waiting_irregular = firn_forecast_waiting(load, false);
    r->two_copies_years = firn_forecast_two_copies(&two, false);
}

static enum firn_status lay_out(struct work *w)
{
    const struct firn_sheet_geometry *geometry = &w->plan->geometry;
    struct firn_forecast_result *r = w->result;
    uint64_t full, rest;

    r->data_blocks = w->plan->bytes / FIRN_BLOCK_PAYLOAD_BYTES + (w->plan->bytes % FIRN_BLOCK_PAYLOAD_BYTES != 0);
    full = firn_sheet_full_data(geometry);
    rest = r->data_blocks % full;
    w->shelves[0].sheets = (double)(r->data_blocks / full);
    if (firn_sheet_shape_of(geometry, (uint32_t)full, &w->shelves[0].shape) != FIRN_OK)
        return FIRN_BAD_ARGUMENT;
    r->blocks = r->data_blocks / full * firn_sheet_full_blocks(geometry);
    r->rows = r->data_blocks / full * w->shelves[0].shape.rows;
    r->last_sheet = w->shelves[0].shape;
    if (rest > 0) {
        if (firn_sheet_shape_of(geometry, (uint32_t)rest, &w->shelves[1].shape) != FIRN_OK)
            return FIRN_BAD_ARGUMENT;
        w->shelves[1].sheets = 1;
        r->last_sheet = w->shelves[1].shape;
        r->blocks += rest + r->last_sheet.reserve_blocks;
        r->rows += r->last_sheet.rows;
    }
    r->container_bytes = (r->blocks + 1) * FIRN_BLOCK_BYTES;      /* the title page is in front */
    return FIRN_OK;
}

static bool plan_valid(const struct firn_forecast_plan *plan)
{
    return plan->bytes > 0 && plan->bytes < UINT64_C(1) << 62 && firn_sheet_geometry_valid(&plan->geometry) &&
           plan->copies >= 1 && plan->copies <= FIRN_FORECAST_COPIES_MAX && plan->years > 0 && isfinite(plan->years) &&
           plan->interval > 0 && plan->replace >= 0 && isfinite(plan->replace) &&
           plan->correlation >= 0 && plan->correlation <= 1;
}

static enum firn_status forecast(const struct firn_forecast_medium *medium, const struct firn_forecast_plan *plan,
                                 bool outline, struct firn_forecast_result *result)
{
    struct firn_forecast_medium checked = *medium;
    struct work w = { .medium = medium, .plan = plan, .result = result, .outline = outline };

    *result = (struct firn_forecast_result){ .data_blocks = 0 };
    for (unsigned figure = 0; figure < FIRN_FORECAST_FIGURES; figure++)
        if (!firn_forecast_figure_valid(figure, *firn_forecast_figure(&checked, figure)))
            return FIRN_BAD_ARGUMENT;
    if (!plan_valid(plan) || lay_out(&w) != FIRN_OK)
        return FIRN_BAD_ARGUMENT;
    run_years(&w);
    if (!outline)
        look_around(&w);
    return FIRN_OK;
}

enum firn_status firn_forecast_run(const struct firn_forecast_medium *medium, const struct firn_forecast_plan *plan,
                                   struct firn_forecast_result *result)
{
    return forecast(medium, plan, false, result);
}

enum firn_status firn_forecast_outline(const struct firn_forecast_medium *medium,
                                       const struct firn_forecast_plan *plan, struct firn_forecast_result *result)
{
    return forecast(medium, plan, true, result);
}
