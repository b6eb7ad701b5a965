/*
 * care/forecast_copies.c - several copies: what is lost when no copy has it
 *
 * With correlation c all copies share one fate with probability c, else each has its own. Of copies that fail till the
 * end, those count here of which at least one fails within the interval; the rest belongs to the next.
 * SPDX-License-Identifier: BSD-2-Clause
 */
#include "care/forecast_copies.h"

#include "care/forecast_log.h"

/* ln P(it fails behind the interval, given that it fails till the end) */
static double ln_late(const struct firn_forecast_copies_chance *one)
{
    return one->ln_till == -INFINITY ? 0 : firn_forecast_log_not(firn_forecast_log_cap(one->ln_in - one->ln_till));
}

static double mix(double c, double ln_shared, double ln_apart)
{
    return firn_forecast_log_add(c > 0 ? log(c) + ln_shared : -INFINITY, c < 1 ? log1p(-c) + ln_apart : -INFINITY);
}

double firn_forecast_copies_media(const struct firn_forecast_plan *plan,
                                  const struct firn_forecast_copies_chance *medium)
{
    const unsigned n = plan->copies;

    if (n == 1 || medium->ln_in == -INFINITY)
        return medium->ln_in;
    return mix(plan->correlation, medium->ln_in, n * medium->ln_till + firn_forecast_log_not(n * ln_late(medium)));
}

double firn_forecast_copies_kept(const struct firn_forecast_plan *plan,
                                 const struct firn_forecast_copies_chance *medium, unsigned kept)
{
    const unsigned n = plan->copies, lost = n - kept;
    double ln_kept = firn_forecast_log_not(medium->ln_till);
    double choices = firn_forecast_log_factorial(n) - firn_forecast_log_factorial(kept) -
                     firn_forecast_log_factorial(lost);
    double apart = choices + kept * ln_kept + (lost > 0 ? lost * medium->ln_till : 0);

    return n == 1 ? ln_kept : mix(plan->correlation, kept == n ? ln_kept : -INFINITY, apart);
}

double firn_forecast_copies_lost(const struct firn_forecast_plan *plan,
                                 const struct firn_forecast_copies_chance *medium, unsigned kept,
                                 const struct firn_forecast_copies_chance *one)
{
    double media_late = plan->copies > kept ? (plan->copies - kept) * ln_late(medium) : 0, late = ln_late(one);

    if (one->ln_till == -INFINITY)
        return -INFINITY;
    return mix(plan->correlation, one->ln_till + firn_forecast_log_not(media_late + late),
               kept * one->ln_till + firn_forecast_log_not(media_late + kept * late));
}
