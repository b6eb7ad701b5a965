/* care/trend.c - whether damage comes faster than it used to */
/* SPDX-License-Identifier: BSD-2-Clause */
#define _DEFAULT_SOURCE     /* lgamma_r: lgamma writes a global */
#include "care/trend.h"

#include <math.h>

/* One in a thousand, as a chance and as a quantile of the normal distribution (Abramowitz and Stegun, table 26.5). */
static const double rare = 0.001, rare_deviations = 3.0902;

static double log_choose(double n, double k)
{
    int sign;

    return lgamma_r(n + 1, &sign) - lgamma_r(k + 1, &sign) - lgamma_r(n - k + 1, &sign);
}

/* P(X = k) + P(X = k + 1) + ... for k beyond the mean, where terms only fall; q is 1 - p. */
static double falling_sum(uint64_t k, uint64_t n, double p, double q)
{
    double term = exp(log_choose((double)n, (double)k) + (double)k * log(p) + (double)(n - k) * log(q)), sum = 0;

    for (; k <= n && term > sum * 1e-17; k++) {
        sum += term;
        term *= (double)(n - k) / (double)(k + 1) * p / q;
    }
    return sum < 1 ? sum : 1;
}

double firn_trend_binomial_tail(uint64_t least, uint64_t n, double p)
{
    if (least == 0 || (p >= 1 && least <= n))
        return 1;
    if (least > n || p <= 0)
        return 0;
    if ((double)least > (double)n * p)
        return falling_sum(least, n, p, 1 - p);
    return 1 - falling_sum(n - least + 1, n, 1 - p, p);      /* failures instead: at most n - least of them */
}

/* The centre of the places in time, in standard deviations from where a steady rate would have it. */
static double crowding(const struct firn_trend_interval *intervals, size_t count, double seconds, double places)
{
    double at = 0, mean = 0, square = 0, sum = 0, variance;

    for (size_t i = 0; i < count; i++) {
        double share = intervals[i].seconds / seconds, middle = (at + intervals[i].seconds / 2) / seconds;

        mean += share * middle;
        square += share * middle * middle;
        sum += (double)intervals[i].places * middle;
        at += intervals[i].seconds;
    }
    variance = places * (square - mean * mean);
    return variance > 0 ? (sum - places * mean) / sqrt(variance) : 0;
}

struct firn_trend firn_trend_judge(const struct firn_trend_interval *intervals, size_t count)
{
    struct firn_trend trend = { .newest_chance = 1 };
    double seconds;
    uint64_t places;

    if (count == 0)
        return trend;
    trend.newest_places = intervals[count - 1].places;
    trend.newest_seconds = intervals[count - 1].seconds;
    for (size_t i = 0; i + 1 < count; i++) {
        trend.earlier_places += intervals[i].places;
        trend.earlier_seconds += intervals[i].seconds;
    }
    seconds = trend.newest_seconds + trend.earlier_seconds;
    places = trend.newest_places + trend.earlier_places;
    if (count < 2 || trend.newest_places == 0 || !(trend.newest_seconds > 0) || !(trend.earlier_seconds > 0))
        return trend;
    trend.newest_chance = firn_trend_binomial_tail(trend.newest_places, places, trend.newest_seconds / seconds);
    if (places >= FIRN_TREND_PLACES_MIN)
        trend.crowding = crowding(intervals, count, seconds, (double)places);
    trend.grows = trend.newest_chance < rare || trend.crowding > rare_deviations;
    return trend;
}
