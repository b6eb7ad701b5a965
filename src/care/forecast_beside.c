/*
 * care/forecast_beside.c - two rows side by side, since runs take neighbours together
 *
 * As care/forecast_row.c, with the counts of two rows at once: along the first row's blocks, each followed by the
 * second row's. Not in logarithms, for speed: what is too small for a double does not matter to the ratio wanted here.
 * SPDX-License-Identifier: BSD-2-Clause
 */
#include "care/forecast_beside.h"

#include "care/forecast_chain.h"
#include "care/forecast_log.h"

enum { GOOD = FIRN_FORECAST_CHAIN_GOOD, BAD = FIRN_FORECAST_CHAIN_BAD, STATES = FIRN_FORECAST_CHAIN_STATES };
enum { M_MAX = 64, COUNTS_MAX = M_MAX + 2 };

static const double least_ln_row = -92;      /* 1e-40 */

struct counting {
    unsigned beyond;                                   /* m + 1 */
    double near[STATES][STATES], far[STATES][STATES];  /* steps: first row to second, second to first */
    double lost[STATES], kept[STATES];
    double chance[STATES][COUNTS_MAX][COUNTS_MAX];     /* state, lost of the first row, lost of the second */
};

static void start(struct counting *c, const struct firn_forecast_row *row)
{
    struct firn_forecast_chain near, far;

    firn_forecast_chain_make(row, 1, &near);
    firn_forecast_chain_make(row, row->apart - 1, &far);
    c->beyond = row->m + 1;
    for (unsigned state = GOOD; state < STATES; state++) {
        for (unsigned to = GOOD; to < STATES; to++) {
            c->near[state][to] = exp(near.ln_step[state][to]);
            c->far[state][to] = exp(far.ln_step[state][to]);
        }
        c->lost[state] = exp(near.ln_lost[state]);
        c->kept[state] = exp(near.ln_kept[state]);
        for (unsigned first = 0; first <= c->beyond; first++)
            for (unsigned second = 0; second <= c->beyond; second++)
                c->chance[state][first][second] = 0;
        c->chance[state][0][0] = exp(near.ln_share[state]);
    }
}

static void move(struct counting *c, double step[STATES][STATES])
{
    for (unsigned first = 0; first <= c->beyond; first++) {
        double *good = c->chance[GOOD][first], *bad = c->chance[BAD][first];

        for (unsigned second = 0; second <= c->beyond; second++) {
            double was_good = good[second], was_bad = bad[second];

            good[second] = was_good * step[GOOD][GOOD] + was_bad * step[BAD][GOOD];
            bad[second] = was_good * step[GOOD][BAD] + was_bad * step[BAD][BAD];
        }
    }
}

static void meet_first(struct counting *c)
{
    for (unsigned state = GOOD; state < STATES; state++)
        for (unsigned first = c->beyond + 1; first-- > 0;) {
            const double kept = first == c->beyond ? 1 : c->kept[state];
            double *at = c->chance[state][first], *less = first > 0 ? c->chance[state][first - 1] : NULL;

            for (unsigned second = 0; second <= c->beyond; second++)
                at[second] = at[second] * kept + (less != NULL ? less[second] * c->lost[state] : 0);
        }
}

static void meet_second(struct counting *c)
{
    for (unsigned state = GOOD; state < STATES; state++)
        for (unsigned first = 0; first <= c->beyond; first++) {
            double *at = c->chance[state][first];

            at[c->beyond] += at[c->beyond - 1] * c->lost[state];
            for (unsigned second = c->beyond - 1; second > 0; second--)
                at[second] = at[second] * c->kept[state] + at[second - 1] * c->lost[state];
            at[0] *= c->kept[state];
        }
}

double firn_forecast_beside_both(const struct firn_forecast_row *row, double ln_row)
{
    struct counting c;

    if (firn_forecast_chain_absent(row))
        return 2 * ln_row;
    if (ln_row < least_ln_row || row->m > M_MAX || row->apart < 2)
        return -INFINITY;
    start(&c, row);
    for (unsigned block = 0; block < row->k + row->m; block++) {
        if (block > 0)
            move(&c, c.far);
        meet_first(&c);
        move(&c, c.near);
        meet_second(&c);
    }
    return firn_forecast_log_cap(log(c.chance[GOOD][c.beyond][c.beyond] + c.chance[BAD][c.beyond][c.beyond]));
}

double firn_forecast_beside_any(double ln_row, double ln_both, double rows)
{
    double begins;

    if (ln_row == -INFINITY || ln_row >= 0)
        return ln_row;
    begins = ln_row + firn_forecast_log_not(firn_forecast_log_cap(ln_both - ln_row));
    return firn_forecast_log_or(ln_row, firn_forecast_log_any(begins - firn_forecast_log_not(ln_row), rows - 1));
}
