/*
 * care/forecast_row.h - blocks side by side: what the forecast needs to know where there is no reserve
 *
 * Room: care. Pure.
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_CARE_FORECAST_ROW_H
#define FIRN_CARE_FORECAST_ROW_H

#include "firn/forecast.h"

/* ln P(two blocks that follow each other in the container are both lost); k, m and apart do not matter. */
double firn_forecast_row_neighbours(const struct firn_forecast_row *row);

#endif
