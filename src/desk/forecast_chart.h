/*
 * desk/forecast_chart.h - the table of a forecast as a chart: on the terminal, and as a page to print
 *
 * Room: desk. Across: time between checks; up: the chance, both in powers. A line for each reserve shows rows beyond
 * their reserve, one line the loss of every copy's medium; what counts is the sum of the two.
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_DESK_FORECAST_CHART_H
#define FIRN_DESK_FORECAST_CHART_H

#include "desk/forecast_view.h"

void firn_forecast_chart_plot(const struct firn_forecast_view *f);

/* Writes it as SVG to path, "-" for standard output. Returns an exit status, trouble told. */
int firn_forecast_chart_draw(const struct firn_forecast_view *f, const char *path, bool replace);

#endif
