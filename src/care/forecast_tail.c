/*
 * care/forecast_tail.c - binomial tails in log space
 *
 * Terms are summed from the largest on, each from the one before by its ratio; where the tail is the larger part of the
 * whole, what is not in it is summed instead.
 * SPDX-License-Identifier: BSD-2-Clause
 */
#include "firn/forecast.h"

#include "care/forecast_log.h"

/* ln P(X = j) */
static double ln_term(uint64_t n, uint64_t j, double ln_p, double ln_q)
{
    double choices = firn_forecast_log_factorial(n) - firn_forecast_log_factorial(j) -
                     firn_forecast_log_factorial(n - j);

    return choices + (j > 0 ? (double)j * ln_p : 0) + (n > j ? (double)(n - j) * ln_q : 0);
}

/* ln of the sum of the terms from `first` on, up or down, while they matter. The caller sees to it that they fall. */
static double ln_terms(uint64_t n, uint64_t first, bool upwards, double ln_p, double ln_q)
{
    double odds = exp(upwards ? ln_p - ln_q : ln_q - ln_p), term = 1, sum = 1;

    for (uint64_t j = first; upwards ? j < n : j > 0; j = upwards ? j + 1 : j - 1) {
        term *= odds * (upwards ? (double)(n - j) / (double)(j + 1) : (double)j / (double)(n - j + 1));
        sum += term;
        if (term < sum * 1e-18)
            break;
    }
    return ln_term(n, first, ln_p, ln_q) + log(sum);
}

double firn_forecast_tail(uint64_t trials, uint64_t more_than, double ln_p)
{
    double ln_q;

    if (more_than >= trials || ln_p == -INFINITY)
        return -INFINITY;
    if (ln_p >= 0)
        return 0;
    ln_q = firn_forecast_log_not(ln_p);
    /* from the mean on the terms fall, so the first is the largest */
    if ((double)more_than + 1 >= (double)trials * exp(ln_p))
        return ln_terms(trials, more_than + 1, true, ln_p, ln_q);
    return firn_forecast_log_not(ln_terms(trials, more_than, false, ln_p, ln_q));
}
