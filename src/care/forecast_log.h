/*
 * care/forecast_log.h - sums and complements of probabilities that are kept as natural logarithms
 *
 * Room: care. Pure. -INFINITY is 0.
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_CARE_FORECAST_LOG_H
#define FIRN_CARE_FORECAST_LOG_H

#include <math.h>
#include <stdint.h>

/* ln(e^a + e^b). Beyond 40 the smaller one is below a double's last digit. */
static inline double firn_forecast_log_add(double a, double b)
{
    double high = a > b ? a : b, low = a > b ? b : a;

    return low - high > -40 ? high + log1p(exp(low - high)) : high;
}

/* A chance that rounding has put beyond certainty. */
static inline double firn_forecast_log_cap(double a)
{
    return a > 0 ? 0 : a;
}

/* ln(1 - e^a), a <= 0 */
static inline double firn_forecast_log_not(double a)
{
    if (a >= 0)
        return -INFINITY;
    return a > -0.6931471805599453 ? log(-expm1(a)) : log1p(-exp(a));
}

/* ln(1 - (1 - e^a)(1 - e^b)): either of two independent events */
static inline double firn_forecast_log_or(double a, double b)
{
    return firn_forecast_log_cap(firn_forecast_log_add(a, b + firn_forecast_log_not(a)));
}

/* ln(1 - (1 - e^a)^n): at least one of n that happen each with e^a */
static inline double firn_forecast_log_any(double a, double n)
{
    if (a == -INFINITY || n <= 0)
        return -INFINITY;
    if (a >= 0)
        return 0;
    /* (1 - x)^n = exp(n ln(1 - x)); where x is below the range of exp, n x is all there is to it */
    return a < -600 ? a + log(n) : firn_forecast_log_not(n * firn_forecast_log_not(a));
}

/* ln n! */
double firn_forecast_log_factorial(uint64_t n);

#endif
