/*
 * care/forecast_chain.h - good and bad stretches of blocks as a two-state Markov chain
 *
 * Room: care. Pure. E. N. Gilbert, "Capacity of a Burst-Noise Channel", BSTJ 39, 1960, pp. 1253-1265, with losses in
 * the good state too as in E. O. Elliott, BSTJ 42, 1963, pp. 1977-1997. Every n-th block of such a chain makes such a
 * chain again. All chances are natural logarithms.
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_CARE_FORECAST_CHAIN_H
#define FIRN_CARE_FORECAST_CHAIN_H

#include "firn/forecast.h"

enum { FIRN_FORECAST_CHAIN_GOOD, FIRN_FORECAST_CHAIN_BAD, FIRN_FORECAST_CHAIN_STATES };

struct firn_forecast_chain {
    double ln_share[FIRN_FORECAST_CHAIN_STATES];      /* of blocks in each state */
    double ln_step[FIRN_FORECAST_CHAIN_STATES][FIRN_FORECAST_CHAIN_STATES];      /* from, to */
    double ln_lost[FIRN_FORECAST_CHAIN_STATES], ln_kept[FIRN_FORECAST_CHAIN_STATES];
};

/* Whether every block stands for itself, so that no chain is needed. */
bool firn_forecast_chain_absent(const struct firn_forecast_row *row);

/* ln P(a block is lost) */
double firn_forecast_chain_lost(const struct firn_forecast_row *row);

/* The chain of blocks that lie `apart` from each other, row->apart aside. Not for rows without a chain. */
void firn_forecast_chain_make(const struct firn_forecast_row *row, unsigned apart, struct firn_forecast_chain *chain);

#endif
