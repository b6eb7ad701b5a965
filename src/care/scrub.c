/* care/scrub.c - scrub of a file: opened, locked, its journal beside it */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "firn/scrub.h"

#include "care/mend_file.h"
#include "care/pace.h"
#include "care/scrub_order.h"

enum firn_status firn_scrub(const struct firn_scrub_options *options, struct firn_scrub_report *report,
                            struct firn_fault *fault)
{
    enum firn_store_use use = options->report_only ? FIRN_STORE_READ : FIRN_STORE_MEND;
    struct firn_mend_file *file = NULL;
    struct firn_store store;
    struct firn_pace pace;
    enum firn_status status;

    *report = (struct firn_scrub_report){ .title = FIRN_SCRUB_TITLE_UNKNOWN };
    status = firn_store_open(options->path, use, options->memory, &store, fault);
    if (status != FIRN_OK)
        return status;
    status = firn_store_lock(&store, fault);
    if (status == FIRN_IO && options->report_only)      /* a file system without locks: looking does no harm */
        status = FIRN_OK;
    if (status == FIRN_OK)
        status = firn_mend_file_make(options->path, &store, options->memory, &file, fault);
    if (status == FIRN_OK)
        status = firn_scrub_order(options, options->rate_bytes == 0 ? &store : firn_pace_store(&pace, &store, options),
                                  &file->place, report, fault);
    firn_mend_file_free(file);
    store.close(store.self);
    return status;
}
