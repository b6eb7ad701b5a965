/* care/drill.c - a drill on a file: its copy in a nameless temporary one */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "firn/drill.h"

#include "care/drill_store.h"

enum firn_status firn_drill(const struct firn_drill_options *options, struct firn_drill_report *report,
                            struct firn_fault *fault)
{
    struct firn_store original, copy;
    enum firn_status status;

    *report = (struct firn_drill_report){ 0 };
    status = firn_store_open(options->path, FIRN_STORE_READ, options->memory, &original, fault);
    if (status != FIRN_OK)
        return status;
    status = firn_store_temporary(options->scratch, options->memory, &copy, fault);
    if (status == FIRN_OK) {
        status = firn_drill_store(options, &original, &copy, report, fault);
        copy.close(copy.self);
    }
    original.close(original.self);
    return status;
}
