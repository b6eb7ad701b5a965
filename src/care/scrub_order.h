/*
 * care/scrub_order.h - scrub of a store whose blocks may be moved, or read right only when they are read again
 *
 * Room: care.
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_CARE_SCRUB_ORDER_H
#define FIRN_CARE_SCRUB_ORDER_H

#include "care/mend.h"
#include "firn/scrub.h"

/*
 * As firn_scrub_store, with the patience that options->readings asks for. Where bytes of the container were lost, or
 * others put in, its blocks are checked where they are, and nothing is written: report->stretches.
 */
enum firn_status firn_scrub_order(const struct firn_scrub_options *options, struct firn_store *store,
                                  const struct firn_mend_place *place, struct firn_scrub_report *report,
                                  struct firn_fault *fault);

#endif
