/*
 * tests/bench/survival_theory.c - what ought to come back, by arithmetic that shares nothing with the codes
 * SPDX-License-Identifier: BSD-2-Clause
 */
#include "survival_theory.h"

#include <math.h>

/* P(exactly i of n), 0 < p < 1. */
static double exactly(unsigned n, double p, unsigned i)
{
    return exp(lgamma(n + 1.0) - lgamma(i + 1.0) - lgamma(n - i + 1.0) + i * log(p) + (n - i) * log1p(-p));
}

double theory_at_most(unsigned n, double p, unsigned most)
{
    double sum = 0;

    if (p <= 0)
        return 1;
    if (p >= 1)
        return most >= n;
    for (unsigned i = 0; i <= most && i <= n; i++)
        sum += exactly(n, p, i);
    return sum < 1 ? sum : 1;
}

double theory_loss(unsigned n, unsigned m, double fails)
{
    double sum = 0;

    if (fails <= 0 || fails >= 1)
        return fails >= 1;
    for (unsigned i = m + 1; i <= n; i++)
        sum += exactly(n, fails, i) * i / n;
    return sum;
}

double theory_lanes(double p)
{
    return pow(theory_at_most(512, p, 1), 64);
}

double theory_row(unsigned n, unsigned m, double fails)
{
    return theory_at_most(n, fails, m);
}

double theory_column(unsigned n, unsigned m, double p)
{
    return theory_at_most(n, -expm1(8 * log1p(-p)), m / 2);
}

double theory_columns(unsigned n, unsigned m, double p)
{
    return pow(theory_column(n, m, p), 3968);
}

static double capacity(double p)
{
    return 1 + p * log2(p) + (1 - p) * log2(1 - p);
}

double theory_shannon_limit(double rate)
{
    double low = 1e-12, high = 0.5 - 1e-12;

    for (unsigned i = 0; i < 100; i++) {
        double middle = (low + high) / 2;

        if (capacity(middle) > rate)
            low = middle;
        else
            high = middle;
    }
    return low;
}

void theory_interval(unsigned found, unsigned trials, double *low, double *high)
{
    const double z = 1.959964, n = trials, p = found / n, under = 1 + z * z / n;
    const double centre = (p + z * z / (2 * n)) / under, half = z * sqrt(p * (1 - p) / n + z * z / (4 * n * n)) / under;

    *low = found == 0 ? 0 : centre - half;
    *high = found == trials ? 1 : centre + half;
}
