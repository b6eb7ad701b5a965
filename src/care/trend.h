/*
 * care/trend.h - whether damage comes faster than it used to
 *
 * Room: care. Pure arithmetic over numbers of damaged places found in successive intervals. Two questions are asked,
 * each answered with "yes" by accident once in a thousand times while damage comes at a steady rate:
 *
 * - Has the newest interval more than its share? Given their sum, places of a steady Poisson stream fall into the
 *   newest interval with the binomial distribution of its share of the time: the exact conditional test for two Poisson
 *   rates (J. Przyborowski and H. Wilenski, Biometrika 31, 1940, pp. 313-323; from memory).
 * - Do places crowd towards the end? The score test against a log-linear rate, for counts in intervals (D. R. Cox and
 *   P. A. W. Lewis, The Statistical Analysis of Series of Events, 1966, chapter 3; from memory), once there are enough
 *   places for its normal approximation.
 *
 * Places rather than blocks are counted because blocks fail in runs, which are one event. What fails together without
 * touching is still counted apart, so the odds are a guide and no more. A warning is a reason to look at the medium,
 * and silence is none to trust it.
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_CARE_TREND_H
#define FIRN_CARE_TREND_H

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

/* Places that appeared during an interval of so many seconds; intervals follow one another. */
struct firn_trend_interval { double seconds; uint64_t places; };

struct firn_trend {
    bool grows;                    /* either question is answered with yes */
    double newest_chance;          /* of the newest interval's share at a steady rate; 1 without an answer */
    double crowding;               /* standard deviations by which places crowd towards the end; 0 without an answer */
    uint64_t newest_places, earlier_places;
    double newest_seconds, earlier_seconds;
};

enum { FIRN_TREND_PLACES_MIN = 8 };      /* for the second question */

struct firn_trend firn_trend_judge(const struct firn_trend_interval *intervals, size_t count);

/* P(X >= least) for X of the binomial distribution of n trials with chance p; exact up to rounding. */
double firn_trend_binomial_tail(uint64_t least, uint64_t n, double p);

#endif
