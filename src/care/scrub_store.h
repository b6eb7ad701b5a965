/*
 * care/scrub_store.h - scrub of a store that somebody else has opened and locked
 *
 * Room: care. Apart from firn_scrub so that tests can lend stores that fail.
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_CARE_SCRUB_STORE_H
#define FIRN_CARE_SCRUB_STORE_H

#include "care/mend.h"
#include "firn/scrub.h"

/* options->path only names the container in faults. Otherwise as firn_scrub. */
enum firn_status firn_scrub_store(const struct firn_scrub_options *options, struct firn_store *store,
                                  const struct firn_mend_place *place, struct firn_scrub_report *report,
                                  struct firn_fault *fault);

#endif
