/*
 * care/forecast_outline.h - the part of a forecast that a table needs, at a quarter of the time
 *
 * Room: care. Pure.
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_CARE_FORECAST_OUTLINE_H
#define FIRN_CARE_FORECAST_OUTLINE_H

#include "firn/forecast.h"

/* As firn_forecast_run, but of the causes only rows, medium and any, and nothing of what a scrub finds. */
enum firn_status firn_forecast_outline(const struct firn_forecast_medium *medium,
                                       const struct firn_forecast_plan *plan, struct firn_forecast_result *result);

#endif
