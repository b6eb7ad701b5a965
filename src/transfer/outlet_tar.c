/* transfer/outlet_tar.c - giving items back as a pax archive */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "firn/outlet.h"

#include "base/fault.h"
#include "base/memory.h"
#include "transfer/outlet_run.h"
#include "transfer/pax_time.h"

#include <errno.h>
#include <unistd.h>

enum { BUFFER_BYTES = 1 << 18, ZEROS_BYTES = 1 << 18, END_BYTES = 1024 };      /* the end mark: two records of zeros */

struct job {
    struct firn_outlet_run run;
    int descriptor;
    uint8_t *buffer;                 /* BUFFER_BYTES; what waits to be written */
    size_t used;
    uint8_t *zeros;                  /* ZEROS_BYTES */
    uint64_t written;                /* to the descriptor */
    enum firn_status over;           /* the work is over: wants found out, or writing failed */
    bool second;                     /* the walk that hands out content */
    bool any;
    uint64_t last_number;            /* of the item that wants was asked for last */
    struct archive *archive;         /* of the file at hand; NULL: none, or it is left out */
    bool in_header, dropping;        /* what libarchive writes now is gathered, or not wanted */
    uint8_t *header;
    size_t header_used, header_capacity;
    uint64_t at;                     /* of it, written up to here */
};

/* ---- bytes ---- */

static enum firn_status flush(struct job *job)
{
    size_t done = 0;

    while (done < job->used) {
        ssize_t count = write(job->descriptor, job->buffer + done, job->used - done);

        if (count < 0 && errno == EINTR)
            continue;
        if (count <= 0) {
            job->over = firn_fault_tell(job->run.fault, FIRN_IO, errno, job->written, "the archive");
            return job->over;
        }
        done += (size_t)count;
        job->written += (uint64_t)count;
    }
    job->used = 0;
    return FIRN_OK;
}

static enum firn_status put(struct job *job, const uint8_t *bytes, size_t count)
{
    enum firn_status status = FIRN_OK;

    while (count > 0 && status == FIRN_OK) {
        size_t portion = BUFFER_BYTES - job->used < count ? BUFFER_BYTES - job->used : count;

        memcpy(job->buffer + job->used, bytes, portion);
        job->used += portion;
        bytes += portion;
        count -= portion;
        if (job->used == BUFFER_BYTES)
            status = flush(job);
    }
    return status;
}

static enum firn_status gather(struct job *job, const void *bytes, size_t count)
{
    const struct firn_memory *memory = job->run.memory;
    void *header = job->header;
    enum firn_status status = firn_memory_grow(memory, &header, &job->header_capacity, job->header_used + count, 1);

    job->header = header;
    if (status == FIRN_OK) {
        memcpy(job->header + job->header_used, bytes, count);
        job->header_used += count;
    } else {
        job->over = firn_fault_tell(job->run.fault, status, 0, 0, job->run.name);
    }
    return status;
}

static la_ssize_t take_bytes(struct archive *archive, void *self, const void *bytes, size_t count)
{
    struct job *job = self;
    enum firn_status status = FIRN_STOPPED;

    if (job->in_header)
        status = gather(job, bytes, count);
    else if (!job->dropping)
        status = put(job, bytes, count);
    if (status == FIRN_OK)
        return (la_ssize_t)count;
    archive_set_error(archive, ECANCELED, "the rest is not wanted");
    return -1;
}

/* ---- one item ---- */

/* Writes the header. FIRN_OK with job->archive open; FIRN_END: pax cannot say it, and that was told. */
static enum firn_status begin_entry(struct job *job, struct archive_entry *entry)
{
    int result = ARCHIVE_FATAL;

    job->in_header = true;
    job->header_used = 0;
    firn_pax_enter(job->run.pax);
    job->archive = firn_pax_writer(job->run.pax, entry, take_bytes, job);
    if (job->archive != NULL)
        result = archive_write_header(job->archive, entry);
    firn_pax_leave(job->run.pax);
    job->in_header = false;
    job->at = 0;
    if (job->archive == NULL)
        return firn_fault_tell(job->run.fault, FIRN_NO_MEMORY, 0, 0, job->run.name);
    if (job->over != FIRN_OK)
        return job->over;
    if (result == ARCHIVE_OK || result == ARCHIVE_WARN) {
        firn_pax_time_mend(job->header, job->header_used);
        return put(job, job->header, job->header_used);
    }
    firn_outlet_run_tell(&job->run, FIRN_OUTLET_FAILED, 0, "metadata that a pax header cannot hold");
    return FIRN_END;
}

static void drop_entry(struct job *job)
{
    job->dropping = true;
    if (job->archive != NULL)
        (void)archive_write_close(job->archive);
    archive_write_free(job->archive);
    job->archive = NULL;
    job->dropping = false;
}

/* libarchive refuses only when its memory or our writing failed. */
static enum firn_status broken(const struct job *job)
{
    return job->over != FIRN_OK ? job->over
                                : firn_fault_tell(job->run.fault, FIRN_NO_MEMORY, 0, job->at, job->run.name);
}

static enum firn_status write_data(struct job *job, const uint8_t *bytes, size_t count)
{
    while (count > 0) {
        la_ssize_t done = archive_write_data(job->archive, bytes, count);

        if (done <= 0)
            return broken(job);
        bytes += done;
        count -= (size_t)done;
        job->at += (uint64_t)done;
    }
    return FIRN_OK;
}

/* Zeros up to `at`: libarchive leaves out those that lie in holes of the map. */
static enum firn_status write_zeros(struct job *job, uint64_t at)
{
    enum firn_status status = FIRN_OK;

    while (job->at < at && status == FIRN_OK)
        status = write_data(job, job->zeros, at - job->at < ZEROS_BYTES ? (size_t)(at - job->at) : ZEROS_BYTES);
    return status;
}

static enum firn_status end_entry(struct job *job, uint64_t bytes)
{
    enum firn_status status = write_zeros(job, bytes);

    if (status == FIRN_OK && archive_write_finish_entry(job->archive) != ARCHIVE_OK)
        status = broken(job);
    drop_entry(job);
    return status;
}

static enum firn_status write_bare(struct job *job)
{
    struct archive_entry *entry = job->run.entry;
    enum firn_status status;

    archive_entry_copy_pathname(entry, job->run.name);
    if (archive_entry_hardlink(entry) != NULL) {
        const struct firn_outlet_target *target = firn_outlet_run_link(&job->run);

        if (target == NULL)
            return FIRN_OK;
        archive_entry_copy_hardlink(entry, target->place);
    }
    status = begin_entry(job, entry);
    if (status == FIRN_OK)
        status = end_entry(job, 0);
    if (status == FIRN_OK)
        status = firn_outlet_run_written(&job->run, false);
    drop_entry(job);
    return status == FIRN_END ? FIRN_OK : status;
}

/* An item NAME.gaps behind the item NAME. */
static enum firn_status write_gaps(struct job *job, const struct firn_item *item, enum firn_outlet_verdict verdict)
{
    struct archive_entry *entry = archive_entry_new();
    char name[FIRN_STORED_NAME_ROOM + sizeof ".gaps"];
    size_t name_bytes = strlen(job->run.name), bytes = 0;
    char *text = NULL;
    enum firn_status status = entry == NULL ? FIRN_NO_MEMORY
                                            : firn_outlet_run_gaps(&job->run, item, verdict, &text, &bytes);

    if (status == FIRN_OK) {
        memcpy(name, job->run.name, name_bytes);
        memcpy(name + name_bytes, ".gaps", sizeof ".gaps");
        archive_entry_copy_pathname(entry, name);
        archive_entry_set_mode(entry, AE_IFREG | 0644);
        archive_entry_set_size(entry, (la_int64_t)bytes);
        if (archive_entry_mtime_is_set(job->run.entry))
            archive_entry_set_mtime(entry, archive_entry_mtime(job->run.entry),
                                    archive_entry_mtime_nsec(job->run.entry));
        status = begin_entry(job, entry);
        if (status == FIRN_OK)
            status = write_data(job, (const uint8_t *)text, bytes);
        if (status == FIRN_OK)
            status = end_entry(job, bytes);
        drop_entry(job);
    }
    job->run.memory->put(job->run.memory->self, text);
    archive_entry_free(entry);
    return status == FIRN_END ? FIRN_OK : status;
}

/* ---- what the reader calls ---- */

/*
 * With foresight the reader goes through the files once before it goes through all items, and asks both times. The
 * first time is over when something else than a file comes, or a number comes again.
 */
static bool visit_wants(void *self, const struct firn_item *item)
{
    struct job *job = self;

    if (!item->has_content || (job->any && item->number <= job->last_number))
        job->second = true;
    job->any = true;
    job->last_number = item->number;
    job->run.quiet = !job->second;
    if (job->over != FIRN_OK)
        return true;
    return firn_outlet_run_take(&job->run, item, &job->over) || job->over != FIRN_OK;
}

static enum firn_status visit_begin(void *self, const struct firn_item *item, uint64_t foreseen_lost_bytes)
{
    struct job *job = self;
    enum firn_status status = job->over;

    if (status != FIRN_OK)
        return status;
    if (!item->has_content)
        return write_bare(job);
    if (foreseen_lost_bytes > 0 && !job->run.options->keep_incomplete)
        return FIRN_OK;
    archive_entry_copy_pathname(job->run.entry, job->run.name);
    firn_pax_map(job->run.entry, item);
    status = begin_entry(job, job->run.entry);
    if (status == FIRN_OK)
        return FIRN_OK;
    drop_entry(job);
    return status == FIRN_END ? FIRN_OK : status;
}

static enum firn_status visit_bytes(void *self, const struct firn_item *item, uint64_t at, const uint8_t *bytes,
                                    size_t count)
{
    struct job *job = self;
    enum firn_status status;

    (void)item;
    if (job->archive == NULL)
        return FIRN_OK;
    status = write_zeros(job, at);
    if (status == FIRN_OK)
        status = write_data(job, bytes, count);
    job->run.report->bytes += count;
    firn_outlet_run_progress(&job->run);
    return status;
}

static enum firn_status visit_gap(void *self, const struct firn_item *item, uint64_t at, uint64_t count,
                                  enum firn_reader_loss why, uint64_t container_at)
{
    struct job *job = self;

    (void)item;
    return firn_outlet_run_gap(&job->run, at, count, why, container_at);
}

static void visit_lost_blocks(void *self, uint64_t first, uint64_t last, uint64_t count)
{
    struct job *job = self;

    firn_outlet_run_lost_blocks(&job->run, first, last, count);
}

static enum firn_status visit_end(void *self, const struct firn_item *item, const struct firn_reader_outcome *outcome)
{
    struct job *job = self;
    enum firn_outlet_verdict verdict = firn_outlet_run_judge(&job->run, outcome);
    bool begun = job->archive != NULL, whole = verdict == FIRN_OUTLET_IS_WHOLE;
    enum firn_status status = FIRN_OK;

    firn_outlet_run_progress(&job->run);
    if (!item->has_content)
        return FIRN_OK;
    if (begun)
        status = end_entry(job, item->bytes);
    if (!whole)
        firn_outlet_run_tell_verdict(&job->run, verdict, item, begun);
    if (status == FIRN_OK && begun)
        status = firn_outlet_run_written(&job->run, !whole);
    if (status == FIRN_OK && begun && !whole && job->run.options->keep_incomplete)
        status = write_gaps(job, item, verdict);
    return status;
}

/* ---- the whole ---- */

static enum firn_status write_archive(struct job *job, struct firn_reader *reader)
{
    const struct firn_reader_visitor visitor = {
        .self = job, .wants = visit_wants, .begin = visit_begin, .bytes = visit_bytes, .gap = visit_gap,
        .end = visit_end, .lost_blocks = visit_lost_blocks, .foresight = true
    };
    enum firn_status status;

    job->buffer = job->run.memory->get(job->run.memory->self, BUFFER_BYTES);
    job->zeros = firn_memory_get_zeroed(job->run.memory, 1, ZEROS_BYTES);
    if (job->buffer == NULL || job->zeros == NULL)
        return firn_fault_tell(job->run.fault, FIRN_NO_MEMORY, 0, 0, "");
    status = firn_outlet_run_walk(&job->run, reader, &visitor);
    drop_entry(job);
    if (status == FIRN_OK)
        status = job->over;
    if (status == FIRN_OK)
        status = put(job, job->zeros, END_BYTES);
    return status == FIRN_OK ? flush(job) : status;
}

enum firn_status firn_outlet_tar(struct firn_reader *reader, int descriptor, const struct firn_outlet_options *options,
                                 struct firn_fault *fault, struct firn_outlet_report *report)
{
    struct job *job = options->memory->get(options->memory->self, sizeof *job);
    enum firn_status status;

    if (job == NULL) {
        *report = (struct firn_outlet_report){ 0 };
        return firn_fault_tell(fault, FIRN_NO_MEMORY, 0, 0, "");
    }
    memset(job, 0, sizeof *job);
    job->descriptor = descriptor;
    status = firn_outlet_run_start(&job->run, reader, options, fault, report);
    if (status == FIRN_OK)
        status = write_archive(job, reader);
    options->memory->put(options->memory->self, job->buffer);
    options->memory->put(options->memory->self, job->zeros);
    options->memory->put(options->memory->self, job->header);
    firn_outlet_run_end(&job->run);
    options->memory->put(options->memory->self, job);
    return status;
}
