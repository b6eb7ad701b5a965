/*
 * care/forecast_table.c - reserves beside intervals between scrubs, and the cheapest choice that is good enough
 * SPDX-License-Identifier: BSD-2-Clause
 */
#include "care/forecast_outline.h"

#include <math.h>

static double cost_of(const struct firn_forecast_table *table, const struct firn_forecast_plan *plan,
                      const struct firn_forecast_result *result)
{
    double stored = plan->copies * (double)result->container_bytes / (double)plan->bytes;
    double checks = isinf(plan->interval) ? 0 : 1 / plan->interval;

    return stored * (table->keep + table->check * checks);
}

static bool is_better(const struct firn_forecast_cell *cell, const struct firn_forecast_cell *best)
{
    return cell->cost < best->cost || (cell->cost <= best->cost && cell->ln_lost < best->ln_lost);
}

static enum firn_status fill_cell(const struct firn_forecast_medium *medium, const struct firn_forecast_plan *plan,
                                  struct firn_forecast_table *table, unsigned reserve, unsigned interval)
{
    struct firn_forecast_cell *cell = &table->cells[reserve][interval];
    struct firn_forecast_plan here = *plan;
    struct firn_forecast_result result;
    enum firn_status status;

    here.geometry = table->geometries[reserve];
    here.interval = table->intervals[interval];
    status = firn_forecast_outline(medium, &here, &result);
    if (status != FIRN_OK)
        return status;
    *cell = (struct firn_forecast_cell){
        result.ln_lost[FIRN_FORECAST_ANY], result.ln_lost[FIRN_FORECAST_ROWS], cost_of(table, &here, &result),
        result.ln_lost[FIRN_FORECAST_ANY] <= table->ln_target
    };
    table->ln_medium[interval] = result.ln_lost[FIRN_FORECAST_MEDIUM];
    if (cell->meets &&
        (!table->found || is_better(cell, &table->cells[table->best_reserve][table->best_interval]))) {
        table->found = true;
        table->best_reserve = reserve;
        table->best_interval = interval;
    }
    return FIRN_OK;
}

enum firn_status firn_forecast_table_fill(const struct firn_forecast_medium *medium,
                                          const struct firn_forecast_plan *plan, struct firn_forecast_table *table)
{
    enum firn_status status = FIRN_OK;

    if (table->reserve_count < 1 || table->reserve_count > FIRN_FORECAST_CHOICES || table->interval_count < 1 ||
        table->interval_count > FIRN_FORECAST_CHOICES || !(table->keep >= 0) || !(table->check >= 0))
        return FIRN_BAD_ARGUMENT;
    table->found = false;
    for (unsigned reserve = 0; reserve < table->reserve_count && status == FIRN_OK; reserve++)
        for (unsigned interval = 0; interval < table->interval_count && status == FIRN_OK; interval++)
            status = fill_cell(medium, plan, table, reserve, interval);
    return status;
}
