/*
 * care/forecast_row.c - what becomes of the blocks of one row when losses come in runs
 *
 * Good and bad stretches of blocks follow each other as a two-state Markov chain: E. N. Gilbert, "Capacity of a
 * Burst-Noise Channel", BSTJ 39, 1960, pp. 1253-1265, with losses in the good state too as in E. O. Elliott, BSTJ 42,
 * 1963, pp. 1977-1997. Every D-th block of a two-state chain is such a chain again, so the number of lost blocks in a
 * row follows exactly by going along its blocks with the chances of every count so far.
 * SPDX-License-Identifier: BSD-2-Clause
 */
#include "care/forecast_row.h"

#include "care/forecast_log.h"

enum { GOOD, BAD, STATES, COUNTS_MAX = 256 + 1 };

/* All chances are logarithms. */
struct chain {
    unsigned beyond;                       /* m + 1; the last count stands for all that are greater */
    double ln_share[STATES];               /* of blocks in each state */
    double ln_step[STATES][STATES];        /* from, to */
    double ln_lost[STATES], ln_kept[STATES];
    double chance[STATES][COUNTS_MAX];     /* of being in this state with this many lost */
    double data[STATES][COUNTS_MAX];       /* the same, times how many of the lost are data blocks, on average */
};

/* The chain of every apart-th block: with a = 1 - P(leave good) - P(leave bad), a step is 1 - a^apart of the share. */
static void make_steps(struct chain *chain, const struct firn_forecast_row *row)
{
    double bad = exp(row->ln_bad), leave = 1 / row->run_blocks, ln_good = firn_forecast_log_not(row->ln_bad);
    double a = 1 - leave - leave * bad / (1 - bad), fresh;

    /* more bad than good: stretches of good blocks would be shorter than a block; then every block stands for itself */
    if (!(a > 0))
        a = 0;
    fresh = a > 0 ? log(-expm1(row->apart * log(a))) : 0;
    chain->ln_share[GOOD] = ln_good;
    chain->ln_share[BAD] = row->ln_bad;
    chain->ln_step[GOOD][BAD] = row->ln_bad + fresh;
    chain->ln_step[BAD][GOOD] = ln_good + fresh;
    chain->ln_step[GOOD][GOOD] = firn_forecast_log_not(chain->ln_step[GOOD][BAD]);
    chain->ln_step[BAD][BAD] = firn_forecast_log_not(chain->ln_step[BAD][GOOD]);
    chain->ln_lost[GOOD] = row->ln_alone;
    chain->ln_kept[GOOD] = firn_forecast_log_not(row->ln_alone);
    chain->ln_lost[BAD] = 0;
    chain->ln_kept[BAD] = -INFINITY;
}

static void start(struct chain *chain)
{
    for (unsigned state = GOOD; state < STATES; state++) {
        for (unsigned count = 0; count <= chain->beyond; count++)
            chain->chance[state][count] = chain->data[state][count] = -INFINITY;
        chain->chance[state][0] = chain->ln_share[state];
    }
}

static void move(const struct chain *chain, double from[STATES][COUNTS_MAX])
{
    for (unsigned count = 0; count <= chain->beyond; count++) {
        double good = from[GOOD][count], bad = from[BAD][count];

        from[GOOD][count] = firn_forecast_log_add(good + chain->ln_step[GOOD][GOOD], bad + chain->ln_step[BAD][GOOD]);
        from[BAD][count] = firn_forecast_log_add(good + chain->ln_step[GOOD][BAD], bad + chain->ln_step[BAD][BAD]);
    }
}

/* A block is met: kept, or lost and counted. Counts go down so that each is moved once. */
static void meet(struct chain *chain, bool is_data)
{
    const unsigned beyond = chain->beyond;

    for (unsigned state = GOOD; state < STATES; state++) {
        const double lost = chain->ln_lost[state], kept = chain->ln_kept[state];
        double *chance = chain->chance[state], *data = chain->data[state];

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

static double ln_either(const struct firn_forecast_row *row)
{
    return firn_forecast_log_add(row->ln_bad, row->ln_alone + firn_forecast_log_not(row->ln_bad));
}

static bool stand_alone(const struct firn_forecast_row *row)
{
    return row->ln_bad == -INFINITY || row->ln_bad >= 0 || row->run_blocks <= 1;
}

double firn_forecast_row_neighbours(const struct firn_forecast_row *row)
{
    struct firn_forecast_row beside = *row;
    double both = -INFINITY;
    struct chain chain;

    if (stand_alone(row))
        return row->ln_bad >= 0 ? 0 : 2 * ln_either(row);
    beside.apart = 1;
    make_steps(&chain, &beside);
    for (unsigned from = GOOD; from < STATES; from++)
        for (unsigned to = GOOD; to < STATES; to++)
            both = firn_forecast_log_add(both, chain.ln_share[from] + chain.ln_lost[from] + chain.ln_step[from][to] +
                                         chain.ln_lost[to]);
    return both;
}

void firn_forecast_row(const struct firn_forecast_row *row, struct firn_forecast_row_loss *loss)
{
    const unsigned n = row->k + row->m;
    struct chain chain;

    if (stand_alone(row)) {
        alone(row, row->ln_bad >= 0 ? 0 : ln_either(row), loss);
        return;
    }
    chain.beyond = row->m + 1;
    make_steps(&chain, row);
    start(&chain);
    for (unsigned block = 0; block < n; block++) {
        if (block > 0) {
            move(&chain, chain.chance);
            move(&chain, chain.data);
        }
        meet(&chain, block < row->k);
    }
    loss->ln_row = firn_forecast_log_add(chain.chance[GOOD][chain.beyond], chain.chance[BAD][chain.beyond]);
    loss->ln_block = firn_forecast_log_add(chain.data[GOOD][chain.beyond], chain.data[BAD][chain.beyond]) -
                     log((double)row->k);
    loss->ln_row = firn_forecast_log_cap(loss->ln_row);
    loss->ln_block = firn_forecast_log_cap(loss->ln_block);
}
