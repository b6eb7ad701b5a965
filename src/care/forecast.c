/*
 * care/forecast.c - from rates, years and copies to the chance that something is lost (firn/forecast.h has the model)
 *
 * One interval between scrubs is worked out for one, two, ... copies that still have their medium; the whole time is
 * its intervals one after another, each beginning with sound copies, and a shorter one at the end.
 * SPDX-License-Identifier: BSD-2-Clause
 */
#include "care/forecast_outline.h"

#include "care/forecast_log.h"
#include "care/forecast_row.h"
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

/* Chance among copies: with `correlation` all share one fate, else each has its own. */
static double ln_all(const struct firn_forecast_plan *plan, double ln_one, unsigned copies)
{
    double c = plan->correlation;
    double shared = c > 0 ? log(c) + ln_one : -INFINITY, apart = c < 1 ? log1p(-c) + copies * ln_one : -INFINITY;

    return copies == 1 ? ln_one : firn_forecast_log_add(shared, apart);
}

/* ln P(exactly `kept` of the copies still have their medium), kept > 0 */
static double ln_media_kept(const struct firn_forecast_plan *plan, double ln_medium_lost, unsigned kept)
{
    double ln_kept = firn_forecast_log_not(ln_medium_lost), c = plan->correlation;
    unsigned n = plan->copies, lost = n - kept;
    double choices = firn_forecast_log_factorial(n) - firn_forecast_log_factorial(kept) -
                     firn_forecast_log_factorial(lost);
    double apart = choices + kept * ln_kept + (lost > 0 ? lost * ln_medium_lost : 0);
    double shared = kept == n && c > 0 ? log(c) + ln_kept : -INFINITY;

    return n == 1 ? ln_kept : firn_forecast_log_add(c < 1 ? log1p(-c) + apart : -INFINITY, shared);
}

/* What one medium's rows lose, by shelf. Without a reserve every block is a row of its own. */
struct row_losses {
    struct firn_forecast_row_loss shelves[2];
    double ln_neighbours;      /* without a reserve: that two blocks side by side are lost */
};

static void lose_rows(const struct work *w, double ln_alone, double ln_bad, struct row_losses *losses)
{
    for (unsigned i = 0; i < 2; i++) {
        const struct firn_sheet_shape *shape = &w->shelves[i].shape;
        struct firn_forecast_row row = { shape->m > 0 ? shape->k : 1, shape->m, shape->rows, ln_alone, ln_bad,
                                         run_blocks(w->medium->run_bytes) };

        losses->shelves[i] = (struct firn_forecast_row_loss){ -INFINITY, -INFINITY };
        if (w->shelves[i].sheets > 0)
            firn_forecast_row(&row, &losses->shelves[i]);
        losses->ln_neighbours = firn_forecast_row_neighbours(&row);
    }
}

/*
 * ln P(any of so many blocks in a row is lost in all copies), without a reserve. Whatever is lost begins somewhere: at
 * the first block, or behind one that is not lost.
 */
static double ln_any_block(const struct work *w, const struct row_losses *losses, double ln_block, unsigned copies,
                           double blocks)
{
    double both = ln_all(w->plan, losses->ln_neighbours, copies);
    double begins = ln_block + firn_forecast_log_not(firn_forecast_log_cap(both - ln_block));

    if (ln_block == -INFINITY || ln_block >= 0)
        return ln_block;
    return firn_forecast_log_or(ln_block, firn_forecast_log_any(begins - firn_forecast_log_not(ln_block), blocks - 1));
}

/*
 * Rows lost in every one of `copies` media, and the share of bytes that goes with them. Losses of neighbouring rows go
 * together, so taking rows as independent tells too much, never too little; the same holds for blocks of a segment.
 */
static void meet_copies(const struct work *w, const struct row_losses *losses, unsigned first_shelf, unsigned copies,
                        double *ln_lost, double *ln_share)
{
    *ln_lost = *ln_share = -INFINITY;
    for (unsigned i = first_shelf; i < 2; i++) {
        const struct shelf *shelf = &w->shelves[i];
        double ln_row = ln_all(w->plan, losses->shelves[i].ln_row, copies);
        double ln_block = ln_all(w->plan, losses->shelves[i].ln_block, copies);
        double blocks = shelf->sheets * shelf->shape.data_blocks;

        if (shelf->sheets <= 0)
            continue;
        if (shelf->shape.m == 0)
            ln_row = ln_any_block(w, losses, ln_row, copies, blocks);
        else
            ln_row = firn_forecast_log_any(ln_row, shelf->sheets * shelf->shape.rows);
        *ln_lost = firn_forecast_log_or(*ln_lost, ln_row);
        *ln_share = firn_forecast_log_add(*ln_share, log(blocks / (double)w->result->data_blocks) +
                                          firn_forecast_log_any(ln_block, SEGMENT_BLOCKS));
    }
}

/* The same over however many media are kept. */
static void meet_media(const struct work *w, const struct row_losses *losses, double ln_medium_lost,
                       unsigned first_shelf, double *ln_lost, double *ln_share)
{
    *ln_lost = *ln_share = -INFINITY;
    for (unsigned kept = 1; kept <= w->plan->copies; kept++) {
        double ln_kept = ln_media_kept(w->plan, ln_medium_lost, kept), lost, share;

        meet_copies(w, losses, first_shelf, kept, &lost, &share);
        *ln_lost = firn_forecast_log_add(*ln_lost, ln_kept + lost);
        *ln_share = firn_forecast_log_add(*ln_share, ln_kept + share);
    }
}

/* One interval in which damage gathers for `years`. */
static void run_interval(const struct work *w, double years, struct interval *interval)
{
    double flips = ln_beyond_lanes(w->medium->flips * years), unread = ln_unread(w->medium->read_errors);
    double bad = ln_in_run(w, years), medium = ln_happens(w->medium->loss * years);
    const struct { double ln_alone, ln_bad; } kinds[] = {
        [FIRN_FORECAST_FLIPS] = { flips, -INFINITY },
        [FIRN_FORECAST_RUNS] = { -INFINITY, bad },
        [FIRN_FORECAST_READING] = { unread, -INFINITY },
        [FIRN_FORECAST_ROWS] = { firn_forecast_log_or(flips, unread), bad },
    };

    for (unsigned cause = 0; cause <= FIRN_FORECAST_ROWS; cause++) {
        struct row_losses losses;

        interval->ln_lost[cause] = interval->ln_share[cause] = -INFINITY;
        if (w->outline && cause != FIRN_FORECAST_ROWS)
            continue;
        lose_rows(w, kinds[cause].ln_alone, kinds[cause].ln_bad, &losses);
        meet_media(w, &losses, medium, ALL_SHELVES, &interval->ln_lost[cause], &interval->ln_share[cause]);
        if (cause == FIRN_FORECAST_ROWS)
            meet_media(w, &losses, medium, LAST_SHELF, &interval->ln_lost[FIRN_FORECAST_LAST_SHEET],
                       &interval->ln_share[FIRN_FORECAST_LAST_SHEET]);
    }
    interval->ln_lost[FIRN_FORECAST_MEDIUM] = ln_all(w->plan, medium, w->plan->copies);
    interval->ln_share[FIRN_FORECAST_MEDIUM] = interval->ln_lost[FIRN_FORECAST_MEDIUM];
    /* rows are counted where a medium is left, so the two exclude each other */
    interval->ln_lost[FIRN_FORECAST_ANY] = firn_forecast_log_add(interval->ln_lost[FIRN_FORECAST_ROWS],
                                                                 interval->ln_lost[FIRN_FORECAST_MEDIUM]);
    interval->ln_share[FIRN_FORECAST_ANY] = firn_forecast_log_add(interval->ln_share[FIRN_FORECAST_ROWS],
                                                                  interval->ln_share[FIRN_FORECAST_MEDIUM]);
}

/* While a bad copy is made anew, damage to the others still counts as the same interval's. */
static double exposure(const struct firn_forecast_plan *plan, double years)
{
    return plan->copies > 1 ? years + plan->replace : years;
}

static void run_years(const struct work *w)
{
    const struct firn_forecast_plan *plan = w->plan;
    double whole = floor(plan->years / plan->interval + 1e-9);
    double rest = whole > 0 ? plan->years - whole * plan->interval : plan->years;
    struct interval full, last;
    bool has_rest = rest > 1e-9 * plan->years;

    if (whole > 0)
        run_interval(w, exposure(plan, plan->interval), &full);
    if (has_rest)
        run_interval(w, exposure(plan, rest), &last);
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
