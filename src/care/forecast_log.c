/*
 * care/forecast_log.c - logarithms of factorials
 * SPDX-License-Identifier: BSD-2-Clause
 */
#include "care/forecast_log.h"

/*
 * Stirling's series to the term in n^-5, whose error is below 1 / (1680 n^7): 2e-14 at 32, where it begins.
 */
double firn_forecast_log_factorial(uint64_t n)
{
    const double half_ln_two_pi = 0.91893853320467274178;
    double x = (double)n, product = 1;

    if (n < 32) {
        for (uint64_t i = 2; i <= n; i++)
            product *= (double)i;
        return log(product);
    }
    return (x + 0.5) * log(x) - x + half_ln_two_pi + (1.0 / 12 - (1.0 / 360 - 1.0 / 1260 / (x * x)) / (x * x)) / x;
}
