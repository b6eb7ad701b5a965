/*
 * tests/bench/survival_theory.h - what ought to come back, by arithmetic that shares nothing with the codes
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_BENCH_SURVIVAL_THEORY_H
#define FIRN_BENCH_SURVIVAL_THEORY_H

/* P(at most `most` of n happen, each with probability p), summed term by term. */
double theory_at_most(unsigned n, double p, unsigned most);

/* A block comes back from its own lanes at raw bit error rate p: at most one flip in each of 64 lanes of 512 bits. */
double theory_lanes(double p);

/* A row of n blocks of which m are reserve: at most m fail, each with probability `fails`. */
double theory_row(unsigned n, unsigned m, double fails);

/* The mean part of such a row that is lost: what failed, in rows where more than m did. */
double theory_loss(unsigned n, unsigned m, double fails);

/* A column of n bytes has at most m / 2 wrong ones, at raw bit error rate p; and all 3968 of a row. */
double theory_column(unsigned n, unsigned m, double p);
double theory_columns(unsigned n, unsigned m, double p);

/* The raw bit error rate at which the capacity of the channel, 1 - H(p), is down to `rate` (C. E. Shannon, 1948). */
double theory_shannon_limit(double rate);

/* 95 % interval for a fraction of which `found` of `trials` were seen (E. B. Wilson, 1927, from memory). */
void theory_interval(unsigned found, unsigned trials, double *low, double *high);

#endif
