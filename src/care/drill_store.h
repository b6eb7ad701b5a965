/*
 * care/drill_store.h - a drill on stores that somebody else has opened
 *
 * Room: care. Apart from firn_drill so that tests can lend stores.
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_CARE_DRILL_STORE_H
#define FIRN_CARE_DRILL_STORE_H

#include "firn/drill.h"
#include "firn/store.h"

/* options->path only names the original in faults. copy is written over, again for each trial. */
enum firn_status firn_drill_store(const struct firn_drill_options *options, struct firn_store *original,
                                  struct firn_store *copy, struct firn_drill_report *report, struct firn_fault *fault);

#endif
