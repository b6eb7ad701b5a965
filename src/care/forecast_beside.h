/*
 * care/forecast_beside.h - two rows side by side, since runs take neighbours together
 *
 * Room: care. Pure.
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_CARE_FORECAST_BESIDE_H
#define FIRN_CARE_FORECAST_BESIDE_H

#include "firn/forecast.h"

/*
 * ln P(a row and the one whose blocks follow its own are both lost). ln_row: of one, from firn_forecast_row.
 * -INFINITY, as if never, where that is not worth the time: below 1e-40, or when m is above 64.
 */
double firn_forecast_beside_both(const struct firn_forecast_row *row, double ln_row);

/*
 * ln P(any of `rows` rows side by side is lost), from the chances of one and of two neighbours. Whatever is lost begins
 * somewhere: with the first row, or behind one that is not lost.
 */
double firn_forecast_beside_any(double ln_row, double ln_both, double rows);

#endif
