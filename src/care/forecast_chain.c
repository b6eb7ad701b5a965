/*
 * care/forecast_chain.c - good and bad stretches of blocks as a two-state Markov chain
 * SPDX-License-Identifier: BSD-2-Clause
 */
#include "care/forecast_chain.h"

#include "care/forecast_log.h"

enum { GOOD = FIRN_FORECAST_CHAIN_GOOD, BAD = FIRN_FORECAST_CHAIN_BAD };

bool firn_forecast_chain_absent(const struct firn_forecast_row *row)
{
    return row->ln_bad == -INFINITY || row->ln_bad >= 0 || row->run_blocks <= 1;
}

double firn_forecast_chain_lost(const struct firn_forecast_row *row)
{
    return row->ln_bad >= 0 ? 0 : firn_forecast_log_or(row->ln_bad, row->ln_alone);
}

/* With a = 1 - P(leave good) - P(leave bad), a step over `apart` blocks forgets 1 - a^apart of where it came from. */
void firn_forecast_chain_make(const struct firn_forecast_row *row, unsigned apart, struct firn_forecast_chain *chain)
{
    double bad = exp(row->ln_bad), leave = 1 / row->run_blocks, ln_good = firn_forecast_log_not(row->ln_bad);
    double a = 1 - leave - leave * bad / (1 - bad), forgets;

    /* more bad than good: stretches of good blocks would be shorter than a block; then every block stands for itself */
    if (!(a > 0))
        a = 0;
    forgets = a > 0 ? log(-expm1(apart * log(a))) : 0;
    chain->ln_share[GOOD] = ln_good;
    chain->ln_share[BAD] = row->ln_bad;
    chain->ln_step[GOOD][BAD] = row->ln_bad + forgets;
    chain->ln_step[BAD][GOOD] = ln_good + forgets;
    chain->ln_step[GOOD][GOOD] = firn_forecast_log_not(chain->ln_step[GOOD][BAD]);
    chain->ln_step[BAD][BAD] = firn_forecast_log_not(chain->ln_step[BAD][GOOD]);
    chain->ln_lost[GOOD] = row->ln_alone;
    chain->ln_kept[GOOD] = firn_forecast_log_not(row->ln_alone);
    chain->ln_lost[BAD] = 0;
    chain->ln_kept[BAD] = -INFINITY;
}
