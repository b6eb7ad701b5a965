/*
 * desk/scrub_metrics.h - a scrub for monitoring: gauges as text
 *
 * Room: desk. The text is valid both as OpenMetrics 1.0 and as its forerunner, exposition format 0.0.4: gauges only
 * (counters are named differently in the two), TYPE before HELP, no timestamps, `# EOF` at the end, which the older
 * format takes for a comment.
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_DESK_SCRUB_METRICS_H
#define FIRN_DESK_SCRUB_METRICS_H

#include "desk/scrub_turn.h"

/* exit: what the run has come to so far. Returns what firn_staged_write does. */
enum firn_status firn_scrub_metrics(const char *path, const struct firn_scrub_turn *turns, size_t count, int exit,
                                    struct firn_fault *fault);

#endif
