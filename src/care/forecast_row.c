/*
 * care/forecast_row.c - what becomes of the blocks of one row
 *
 * A row's blocks are every D-th of the chain of blocks, so the number of lost ones follows exactly by going along them
 * with the chances of every count so far.
 * SPDX-License-Identifier: BSD-2-Clause
 */
#include "care/forecast_chain.h"

#include "care/forecast_log.h"

enum { GOOD = FIRN_FORECAST_CHAIN_GOOD, BAD = FIRN_FORECAST_CHAIN_BAD, STATES = FIRN_FORECAST_CHAIN_STATES };
enum { COUNTS_MAX = 256 + 1 };

/* All chances are logarithms. */
struct counting {
    struct firn_forecast_chain chain;
    unsigned beyond;                       /* m + 1; the last count stands for all that are greater */
    double chance[STATES][COUNTS_MAX];     /* of being in this state with this many lost */
    double data[STATES][COUNTS_MAX];       /* the same, times how many of the lost are data blocks, on average */
};

static void start(struct counting *c)
{
    for (unsigned state = GOOD; state < STATES; state++) {
        for (unsigned count = 0; count <= c->beyond; count++)
            c->chance[state][count] = c->data[state][count] = -INFINITY;
        c->chance[state][0] = c->chain.ln_share[state];
    }
}

static void move(const struct counting *c, double from[STATES][COUNTS_MAX])
{
    const double (*step)[STATES] = c->chain.ln_step;

    for (unsigned count = 0; count <= c->beyond; count++) {
        double good = from[GOOD][count], bad = from[BAD][count];

        from[GOOD][count] = firn_forecast_log_add(good + step[GOOD][GOOD], bad + step[BAD][GOOD]);
        from[BAD][count] = firn_forecast_log_add(good + step[GOOD][BAD], bad + step[BAD][BAD]);
    }
}

/* A block is met: kept, or lost and counted. Counts go down so that each is moved once. */
static void meet(struct counting *c, bool is_data)
{
    const unsigned beyond = c->beyond;

    for (unsigned state = GOOD; state < STATES; state++) {
        const double lost = c->chain.ln_lost[state], kept = c->chain.ln_kept[state];
        double *chance = c->chance[state], *data = c->data[state];

        if (is_data)      /* beyond m a further loss adds to the data blocks, not to the count */
            data[beyond] = firn_forecast_log_add(data[beyond], chance[beyond] + lost);
        for (unsigned count = beyond; count > 0; count--) {
            double keep = count == beyond ? 0 : kept, more = data[count - 1];

            if (is_data)
                more = firn_forecast_log_add(more, chance[count - 1]);
            data[count] = firn_forecast_log_add(data[count] + keep, more + lost);
            chance[count] = firn_forecast_log_add(chance[count] + keep, chance[count - 1] + lost);
        }
        chance[0] += kept;
        data[0] += kept;
    }
}

/* When each block stands for itself, the binomial tail says it at once. */
static void alone(const struct firn_forecast_row *row, double ln_lost, struct firn_forecast_row_loss *loss)
{
    const unsigned n = row->k + row->m;

    loss->ln_row = firn_forecast_tail(n, row->m, ln_lost);
    /* a block lost, and at least m of the others */
    loss->ln_block = ln_lost + (row->m == 0 ? 0 : firn_forecast_tail(n - 1, row->m - 1, ln_lost));
}

void firn_forecast_row(const struct firn_forecast_row *row, struct firn_forecast_row_loss *loss)
{
    const unsigned n = row->k + row->m;
    struct counting c = { .beyond = row->m + 1 };

    if (firn_forecast_chain_absent(row)) {
        alone(row, firn_forecast_chain_lost(row), loss);
        return;
    }
    firn_forecast_chain_make(row, row->apart, &c.chain);
    start(&c);
    for (unsigned block = 0; block < n; block++) {
        if (block > 0) {
            move(&c, c.chance);
            move(&c, c.data);
        }
        meet(&c, block < row->k);
    }
    loss->ln_row = firn_forecast_log_cap(firn_forecast_log_add(c.chance[GOOD][c.beyond], c.chance[BAD][c.beyond]));
    loss->ln_block = firn_forecast_log_add(c.data[GOOD][c.beyond], c.data[BAD][c.beyond]) - log((double)row->k);
    loss->ln_block = firn_forecast_log_cap(loss->ln_block);
}
