/*
 * desk/forecast_view.h - a forecast and its table, for people and as JSON
 *
 * Room: desk.
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_DESK_FORECAST_VIEW_H
#define FIRN_DESK_FORECAST_VIEW_H

#include "desk/view.h"
#include "firn/forecast.h"

/* What was asked, as one thing that every view of it gets. */
struct firn_forecast_view {
    struct firn_view *view;
    const struct firn_forecast_profile *profile;      /* with the caller's own rates put in */
    const struct firn_forecast_plan *plan;
    double percent;                                   /* of reserve, as asked for */
    double target;                                    /* 0: none */
    double prices[2];                                 /* keeping, checking */
    const struct firn_forecast_table *table;
    const double *percents;                           /* of the table's reserves */
};

enum { FIRN_FORECAST_VIEW_ROOM = 48 };

/* "8.6e-07", "0.0086", "0.26", "none" for a logarithm of a chance. Returns `words`. */
const char *firn_forecast_view_chance(double ln_chance, char words[FIRN_FORECAST_VIEW_ROOM]);
/* "3 months", "1 year", "10 years", "45 days", "never". Returns `words`. */
const char *firn_forecast_view_time(double years, char words[FIRN_FORECAST_VIEW_ROOM]);
/* "14.3 %" */
const char *firn_forecast_view_percent(double percent, char words[FIRN_FORECAST_VIEW_ROOM]);

void firn_forecast_view_result(const struct firn_forecast_view *f, const struct firn_forecast_result *result);
void firn_forecast_view_table(const struct firn_forecast_view *f);

/* The line that goes with every forecast. */
extern const char firn_forecast_view_caution[];

#endif
