/*
 * care/forecast_copies.h - several copies: what is lost when no copy has it
 *
 * Room: care. Pure. All chances are natural logarithms. A loss needs every copy to fail, the first of them within the
 * interval between two scrubs, the others before it has been made anew.
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_CARE_FORECAST_COPIES_H
#define FIRN_CARE_FORECAST_COPIES_H

#include "firn/forecast.h"

/* One copy's chance to fail. */
struct firn_forecast_copies_chance {
    double ln_in;        /* within the interval */
    double ln_till;      /* within the interval or the time until a copy is made anew behind it */
};

/* All media are lost. */
double firn_forecast_copies_media(const struct firn_forecast_plan *plan,
                                  const struct firn_forecast_copies_chance *medium);

/* Exactly `kept` of the copies have their medium till the end, kept > 0. */
double firn_forecast_copies_kept(const struct firn_forecast_plan *plan,
                                 const struct firn_forecast_copies_chance *medium, unsigned kept);

/* Something of that chance is lost in all of the `kept` copies, given that they are kept. */
double firn_forecast_copies_lost(const struct firn_forecast_plan *plan,
                                 const struct firn_forecast_copies_chance *medium, unsigned kept,
                                 const struct firn_forecast_copies_chance *one);

#endif
