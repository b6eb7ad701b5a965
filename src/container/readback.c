/* container/readback.c - reading back what was just written */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "firn/readback.h"

#include "base/fault.h"
#include "container/sheets.h"

#include <string.h>

static enum firn_status check_sheets(const struct firn_reader_options *options,
                                     void (*progress)(void *self, uint64_t blocks), void *progress_self,
                                     struct firn_fault *fault)
{
    struct firn_sheets_options sheets_options = {
        .store = options->store, .memory = options->memory, .threads = options->threads, .stop = options->stop,
        .stop_self = options->stop_self
    };
    struct firn_sheets *sheets;
    enum firn_status status = firn_sheets_open(&sheets_options, fault, &sheets);

    if (status != FIRN_OK)
        return status;
    for (uint64_t i = 0; i < firn_sheets_layout(sheets)->sheets && status == FIRN_OK; i++) {
        struct firn_reader_damage damage;
        bool clean = false;

        status = firn_sheets_check(sheets, i, &clean);
        firn_sheets_damage(sheets, &damage);
        if (status == FIRN_OK && !clean)
            status = firn_fault_tell(fault, FIRN_MISMATCH, 0, firn_sheets_place(damage.blocks_read), "reading back");
        if (progress != NULL)
            progress(progress_self, damage.blocks_read);
    }
    firn_sheets_close(sheets);
    return status;
}

enum firn_status firn_readback(const struct firn_reader_options *options, const struct firn_writer_totals *totals,
                               void (*progress)(void *self, uint64_t blocks), void *progress_self,
                               struct firn_fault *fault)
{
    struct firn_store *store = options->store;
    struct firn_reader *reader;
    int os_error = 0;
    enum firn_status status = store->sync(store->self, &os_error);

    if (status != FIRN_OK)
        return firn_fault_tell(fault, status, os_error, 0, "the container being written");
    store->forget(store->self, 0, totals->container_bytes);
    status = firn_reader_open(options, fault, &reader);
    if (status == FIRN_OK) {
        const struct firn_reader_layout *layout = firn_reader_layout_of(reader);

        if (layout->blocks != totals->blocks || layout->file_bytes != totals->container_bytes || !layout->title_sound ||
            !layout->colophon_found || memcmp(layout->id, totals->id, sizeof layout->id) != 0 ||
            memcmp(layout->catalogue_sha256, totals->catalogue_sha256, sizeof layout->catalogue_sha256) != 0)
            status = firn_fault_tell(fault, FIRN_MISMATCH, 0, 0, "reading back");
        firn_reader_free(reader);
    }
    return status == FIRN_OK ? check_sheets(options, progress, progress_self, fault) : status;
}
