/*
 * care/forecast_published.c - small formulas that others have published, to set beside the forecast
 * SPDX-License-Identifier: BSD-2-Clause
 */
#include "firn/forecast.h"

#include <math.h>

double firn_forecast_read_error(double bytes, double errors_per_bit)
{
    return errors_per_bit >= 1 ? bytes > 0 : -expm1(8 * bytes * log1p(-errors_per_bit));
}

double firn_forecast_waiting(double load, bool regular)
{
    if (isinf(load))
        return 1;
    if (!regular)
        return load / (1 + load);
    /* 1 - (1 - e^-load) / load; for small loads by its series, since the difference loses its digits there */
    return load < 1e-4 ? load / 2 - load * load / 6 : 1 + expm1(-load) / load;
}

/* The chance per time of a second fault of either kind while a first one of either kind is not mended yet. */
double firn_forecast_two_copies(const struct firn_forecast_two_copies *c, bool latent_only)
{
    double visible = 1 / c->visible, latent = 1 / c->latent, unseen = c->mend_latent + c->notice_latent;
    double rate = unseen * latent * latent;

    if (!(c->latent > 0 && c->visible > 0))      /* faults without a pause */
        return 0;
    if (!latent_only)
        rate += c->mend_visible * visible * (visible + latent) + unseen * latent * visible;
    return rate > 0 ? c->alpha / rate : INFINITY;
}
