/* care/scrub_order.c - scrub of a store whose blocks may be moved, or read right only when they are read again */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "care/scrub_order.h"

#include "base/fault.h"
#include "care/scrub_store.h"
#include "container/sheets.h"

#include <string.h>

enum { TAIL_BLOCKS = 4 };

/* Whether one of the last blocks is in its place: then nothing before them was moved. */
static bool tail_in_place(struct firn_store *store, const struct firn_reader_layout *layout)
{
    uint8_t block[FIRN_BLOCK_BYTES];
    bool found = false;

    for (uint64_t i = 1; i <= TAIL_BLOCKS && i <= layout->blocks && !found; i++) {
        uint64_t number = layout->blocks - i;
        struct firn_block_tag tag;
        enum firn_block_state state;
        size_t got = 0;
        int why;

        if (store->read_at(store->self, firn_sheets_place(number), block, sizeof block, &got, &why) != FIRN_OK ||
            got < sizeof block)
            continue;
        state = firn_block_open(block, false, &tag);
        found = (state == FIRN_BLOCK_SOUND || state == FIRN_BLOCK_MENDED) && tag.number == number &&
                memcmp(tag.id, layout->id, sizeof tag.id) == 0;
    }
    return found;
}

/*
 * Whether a layout may be the plain look of a container that bytes were lost from or put into. What follows behind the
 * end of one is no reason by itself: a device is longer than what was written to it.
 */
static bool odd(struct firn_store *store, const struct firn_reader_layout *layout)
{
    return !layout->end_known || layout->blocks_missing > 0 ||
           (layout->foreign_bytes > 0 && !tail_in_place(store, layout));
}

static bool pass_stop(void *self)
{
    const struct firn_scrub_options *options = self;

    return options->stop != NULL && options->stop(options->self);
}

static void pass_progress(void *self, uint64_t at, uint64_t bytes)
{
    const struct firn_scrub_options *options = self;

    if (options->progress != NULL)
        options->progress(options->self, at / FIRN_BLOCK_BYTES, bytes / FIRN_BLOCK_BYTES);
}

/*
 * Looks for blocks that are not where they belong, when there is a reason to. FIRN_OK: realigned shows them in their
 * places; FIRN_END: there is nothing to put in order.
 */
static enum firn_status put_in_order(const struct firn_scrub_options *options, struct firn_store *store,
                                     struct firn_store *realigned, uint64_t *stretches, struct firn_fault *fault)
{
    struct firn_sheets_options sheets_options = { store, options->memory, options->threads, options->stop,
                                                  options->self };
    struct firn_scrub_options own = *options;
    struct firn_store_watch watch = { .self = &own, .progress = pass_progress, .stop = pass_stop };
    struct firn_sheets *sheets;
    enum firn_status status = firn_sheets_open(&sheets_options, fault, &sheets);
    bool look = status == FIRN_NOT_CONTAINER;

    if (status == FIRN_OK) {
        look = odd(store, firn_sheets_layout(sheets));
        firn_sheets_close(sheets);
    }
    return look ? firn_store_realign(store, &watch, options->memory, realigned, stretches, fault) : FIRN_END;
}

/* Scrubs a store, with a patient one in front of it if that is asked for. */
static enum firn_status scrub_patiently(const struct firn_scrub_options *options, struct firn_store *store,
                                        const struct firn_mend_place *place, struct firn_scrub_report *report,
                                        struct firn_fault *fault)
{
    struct firn_store patient;
    enum firn_status status;

    if (options->readings == 0)
        return firn_scrub_store(options, store, place, report, fault);
    status = firn_store_patient(store, options->readings, options->memory, &patient);
    if (status != FIRN_OK)
        return firn_fault_tell(fault, status, 0, 0, options->path);
    status = firn_scrub_store(options, &patient, place, report, fault);
    report->reread = firn_store_patient_gained(&patient);
    patient.close(patient.self);
    return status;
}

enum firn_status firn_scrub_order(const struct firn_scrub_options *options, struct firn_store *store,
                                  const struct firn_mend_place *place, struct firn_scrub_report *report,
                                  struct firn_fault *fault)
{
    struct firn_scrub_options looking = *options;
    struct firn_store realigned;
    uint64_t stretches = 0;
    enum firn_status status = put_in_order(options, store, &realigned, &stretches, fault);

    if (status == FIRN_END)
        return scrub_patiently(options, store, place, report, fault);
    if (status != FIRN_OK)
        return firn_fault_tell(fault, status, fault != NULL ? fault->os_error : 0, 0, options->path);
    looking.report_only = true;
    status = scrub_patiently(&looking, &realigned, place, report, fault);
    report->stretches = stretches;
    realigned.close(realigned.self);
    return status;
}
