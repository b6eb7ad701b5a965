/* transfer/intake_run.c - what taking in folders and taking in archives share */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "transfer/intake_run.h"

#include "base/fault.h"

#include <string.h>

uint64_t firn_intake_left_out(const struct firn_intake_report *report)
{
    uint64_t sum = 0;

    for (unsigned kind = 0; kind < FIRN_INTAKE_PARTIAL; kind++)
        sum += report->findings[kind];
    return sum;
}

enum firn_status firn_intake_run_start(struct firn_intake_run *run, struct firn_writer *writer,
                                       const struct firn_intake_options *options, struct firn_fault *fault,
                                       struct firn_intake_report *report)
{
    enum firn_status status;

    *report = (struct firn_intake_report){ 0 };
    *run = (struct firn_intake_run){
        .writer = writer, .options = options, .memory = options->memory, .fault = fault, .report = report
    };
    run->buffer = run->memory->get(run->memory->self, FIRN_INTAKE_RUN_BUFFER_BYTES);
    status = run->buffer == NULL ? FIRN_NO_MEMORY : firn_pax_make(run->memory, &run->pax);
    if (status == FIRN_OK && options->digests != 0)
        status = firn_intake_more_make(options->digests, run->memory, &run->more);
    return status == FIRN_OK ? FIRN_OK : firn_fault_tell(fault, status, 0, 0, "");
}

void firn_intake_run_end(struct firn_intake_run *run)
{
    firn_intake_more_free(run->more);
    firn_pax_free(run->pax);
    run->memory->put(run->memory->self, run->buffer);
    run->more = NULL;
    run->pax = NULL;
    run->buffer = NULL;
}

void firn_intake_run_tell(struct firn_intake_run *run, enum firn_intake_kind kind, const char *path, int os_error,
                          const char *detail)
{
    const struct firn_intake_finding finding = { .kind = kind, .path = path, .os_error = os_error, .detail = detail };

    run->report->findings[kind]++;
    if (run->options->finding != NULL)
        run->options->finding(run->options->self, &finding);
}

enum firn_status firn_intake_run_go_on(const struct firn_intake_run *run)
{
    return run->options->stop != NULL && run->options->stop(run->options->self) ? FIRN_STOPPED : FIRN_OK;
}

static void tell_progress(const struct firn_intake_run *run)
{
    if (run->options->progress != NULL)
        run->options->progress(run->options->self, run->report->items, run->report->bytes);
}

enum firn_status firn_intake_run_announce(struct firn_intake_run *run, struct archive_entry *entry,
                                          const struct firn_item *item, const char *path)
{
    struct firn_item announced = *item;
    enum firn_status status = firn_pax_header(run->pax, entry, &announced.pax, &announced.pax_bytes);

    if (status == FIRN_OVER_LIMIT) {
        firn_intake_run_tell(run, FIRN_INTAKE_PARTIAL, path, 0, "attributes are too long together");
        archive_entry_xattr_clear(entry);
        archive_entry_acl_clear(entry);
        status = firn_pax_header(run->pax, entry, &announced.pax, &announced.pax_bytes);
    }
    if (status == FIRN_NO_MEMORY)
        return firn_fault_tell(run->fault, status, 0, 0, path);
    if (status != FIRN_OK) {
        firn_intake_run_tell(run, FIRN_INTAKE_UNSUPPORTED, path, 0, "metadata that a pax header cannot hold");
        return FIRN_END;
    }
    if (run->more != NULL && firn_intake_more_start(run->more, item) != FIRN_OK)
        return firn_fault_tell(run->fault, FIRN_NO_MEMORY, 0, 0, path);
    return firn_writer_item(run->writer, &announced);
}

enum firn_status firn_intake_run_content(struct firn_intake_run *run, const uint8_t *bytes, uint64_t count)
{
    static const uint8_t zeros[1 << 14];
    enum firn_status status = FIRN_OK;

    while (count > 0 && status == FIRN_OK) {
        size_t portion = bytes == NULL && count > sizeof zeros ? sizeof zeros : (size_t)count;

        status = firn_writer_content(run->writer, bytes == NULL ? zeros : bytes, portion);
        if (run->more != NULL)
            firn_intake_more_add(run->more, bytes == NULL ? zeros : bytes, portion);
        count -= portion;
        if (bytes != NULL)
            bytes += portion;
        run->report->bytes += portion;
    }
    tell_progress(run);
    return status;
}

enum firn_status firn_intake_run_stored(struct firn_intake_run *run, struct firn_intake_item *told, uint8_t *sha256)
{
    uint8_t own[FIRN_ITEM_SHA256_BYTES];
    uint8_t *digest = sha256 == NULL ? own : sha256;
    enum firn_status status = firn_writer_end(run->writer, told->has_content ? digest : NULL);

    if (status != FIRN_OK)
        return status;
    if (told->has_content)
        told->sha256 = digest;
    if (told->has_content && run->more != NULL)
        told->digests = firn_intake_more_finish(run->more);
    run->report->items++;
    run->report->hard_links += told->link != NULL;
    if (run->options->item != NULL)
        run->options->item(run->options->self, told);
    tell_progress(run);
    return FIRN_OK;
}

enum firn_status firn_intake_run_withdraw(struct firn_intake_run *run, enum firn_intake_kind kind, const char *path,
                                          int os_error, const char *detail)
{
    bool traceless = true;
    enum firn_status status = firn_writer_withdraw(run->writer, &traceless);

    run->report->traces += !traceless;
    firn_intake_run_tell(run, kind, path, os_error, detail);
    return status;
}
