/* care/drill_store.c - copy, spoil, read back, repair, compare; and again */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "care/drill_store.h"

#include "base/fault.h"
#include "care/damage.h"
#include "care/mend_scratch.h"
#include "care/scrub_store.h"
#include "firn/reader.h"

#include <string.h>

enum { PORTION_BYTES = 1 << 20 };

struct run {
    const struct firn_drill_options *options;
    struct firn_drill_report *report;
    struct firn_store *original;
    struct firn_store copy;            /* as lent, but for syncs, which a copy does not need */
    struct firn_mend_scratch journal;
    uint8_t *seen, *good;              /* PORTION_BYTES each */
    uint64_t done, goal;               /* bytes, for the progress */
};

static enum firn_status sync_nothing(void *self, int *os_error)
{
    (void)self;
    *os_error = 0;
    return FIRN_OK;
}

static bool should_stop(const struct run *run)
{
    return run->options->stop != NULL && run->options->stop(run->options->self);
}

static enum firn_status step(struct run *run, uint64_t bytes)
{
    run->done += bytes;
    if (run->options->progress != NULL)
        run->options->progress(run->options->self, run->done < run->goal ? run->done : run->goal, run->goal);
    return should_stop(run) ? FIRN_STOPPED : FIRN_OK;
}

/* Reads all of store[at .. at + count). */
static enum firn_status fetch(struct firn_store *store, uint64_t at, uint8_t *bytes, size_t count, const char *what,
                              struct firn_fault *fault)
{
    size_t got = 0;
    int why = 0;
    enum firn_status status = store->read_at(store->self, at, bytes, count, &got, &why);

    if (status == FIRN_OK && got == count)
        return FIRN_OK;
    return firn_fault_tell(fault, status == FIRN_OK ? FIRN_CHANGED : status, why, at + got, what);
}

static enum firn_status make_copy(struct run *run, struct firn_fault *fault)
{
    struct firn_store *copy = &run->copy;
    uint64_t bytes = run->report->file_bytes;
    int why = 0;
    enum firn_status status = copy->resize(copy->self, bytes, &why);

    for (uint64_t at = 0; at < bytes && status == FIRN_OK; at += PORTION_BYTES) {
        size_t count = bytes - at < PORTION_BYTES ? (size_t)(bytes - at) : PORTION_BYTES;

        status = fetch(run->original, at, run->good, count, run->options->path, fault);
        if (status != FIRN_OK)
            return status;
        status = copy->write_at(copy->self, at, run->good, count, &why);
        if (status == FIRN_OK && (status = step(run, count)) != FIRN_OK)
            return firn_fault_tell(fault, status, 0, 0, run->options->path);
    }
    return status == FIRN_OK ? FIRN_OK : firn_fault_tell(fault, status, why, 0, "the copy");
}

/* --- what a restore gives back --- */

struct restored { uint64_t items_whole, bytes_lost; };

static enum firn_status take_bytes(void *self, const struct firn_item *item, uint64_t at, const uint8_t *bytes,
                                   size_t count)
{
    (void)self, (void)item, (void)at, (void)bytes, (void)count;
    return FIRN_OK;
}

static enum firn_status take_end(void *self, const struct firn_item *item, const struct firn_reader_outcome *outcome)
{
    struct restored *restored = self;

    (void)item;
    restored->items_whole += outcome->lost_bytes == 0 && (!outcome->sum_known || outcome->sum_right);
    restored->bytes_lost += outcome->lost_bytes;
    return FIRN_OK;
}

/* Goes through everything as a restore would. *items is what the catalogue counts, where it can. */
static enum firn_status restore(struct run *run, struct firn_store *store, struct restored *restored, uint64_t *items,
                                struct firn_fault *fault)
{
    struct firn_reader_options options = {
        .store = store, .memory = run->options->memory, .threads = run->options->threads, .stop = run->options->stop,
        .stop_self = run->options->self
    };
    struct firn_reader_visitor visitor = { .self = restored, .bytes = take_bytes, .end = take_end };
    struct firn_reader_walk_report walked;
    struct firn_reader *reader;
    enum firn_status status = firn_reader_open(&options, fault, &reader);

    if (status != FIRN_OK)
        return status;
    *items = firn_reader_layout_of(reader)->items;
    status = firn_reader_walk(reader, &visitor, fault, &walked);
    firn_reader_free(reader);
    return status;
}

/* --- what a scrub makes of it --- */

static enum firn_status scrub(struct run *run, bool report_only, struct firn_store *store,
                              struct firn_scrub_report *scrubbed, struct firn_fault *fault)
{
    struct firn_scrub_options options = {
        .path = report_only ? run->options->path : "the copy", .memory = run->options->memory,
        .threads = run->options->threads, .report_only = report_only, .self = run->options->self,
        .stop = run->options->stop
    };

    return firn_scrub_store(&options, store, &run->journal.place, scrubbed, fault);
}

/* The original must be sound, or what comes back could not be told from what was wrong before. */
static enum firn_status look_at_original(struct run *run, struct firn_fault *fault)
{
    struct firn_drill_report *report = run->report;
    struct firn_scrub_report found;
    struct restored restored = { 0 };
    enum firn_status status = scrub(run, true, run->original, &found, fault);

    if (status != FIRN_OK)
        return status;
    if (found.mended + found.rebuilt + found.lost + found.foreign_bytes > 0 || !found.end_known ||
        found.title != FIRN_SCRUB_TITLE_SOUND || found.file_bytes != (found.blocks + 1) * FIRN_BLOCK_BYTES)
        return firn_fault_tell(fault, FIRN_BAD_DATA, 0, 0, "it is not sound itself");
    report->file_bytes = found.file_bytes;
    status = restore(run, run->original, &restored, &report->items, fault);
    report->least_items_whole = report->items;
    return status;
}

/* Blocks of the copy that are not as in the original; the title page counts as one. */
static enum firn_status compare(struct run *run, uint64_t *differing, struct firn_fault *fault)
{
    uint64_t bytes = run->report->file_bytes, size;
    struct firn_store *copy = &run->copy;
    int why = 0;
    enum firn_status status = copy->size(copy->self, &size, &why);

    *differing = 0;
    if (status != FIRN_OK)
        return firn_fault_tell(fault, status, why, 0, "the copy");
    for (uint64_t at = 0; at < bytes; at += PORTION_BYTES) {
        size_t count = bytes - at < PORTION_BYTES ? (size_t)(bytes - at) : PORTION_BYTES, got = 0;

        status = fetch(run->original, at, run->good, count, run->options->path, fault);
        if (status != FIRN_OK)
            return status;
        if (copy->read_at(copy->self, at, run->seen, count, &got, &why) != FIRN_OK)
            return firn_fault_tell(fault, FIRN_IO, why, at, "the copy");
        for (size_t i = 0; i < count; i += FIRN_BLOCK_BYTES)
            *differing += i + FIRN_BLOCK_BYTES > got || memcmp(run->good + i, run->seen + i, FIRN_BLOCK_BYTES) != 0;
        status = step(run, count);
        if (status != FIRN_OK)
            return firn_fault_tell(fault, status, 0, 0, run->options->path);
    }
    *differing += size > bytes;
    return FIRN_OK;
}

/* --- a trial --- */

/* What cannot be known for a container any more is an outcome of a trial, not a failure of the drill. */
static bool beyond_recognition(enum firn_status status)
{
    return status == FIRN_NOT_CONTAINER || status == FIRN_FOREIGN_FORMAT;
}

/* Reads the spoiled copy, repairs it, compares it with the original. */
static enum firn_status judge_copy(struct run *run, struct firn_drill_trial *trial, struct firn_fault *fault)
{
    struct firn_scrub_report scrubbed;
    struct restored restored = { 0 };
    uint64_t unused, differing, excused;
    enum firn_status status = restore(run, &run->copy, &restored, &unused, fault);

    if (beyond_recognition(status))
        return FIRN_OK;
    if (status == FIRN_OK)
        status = scrub(run, false, &run->copy, &scrubbed, fault);
    if (status == FIRN_OK)
        status = compare(run, &differing, fault);
    if (status != FIRN_OK)
        return status;
    trial->recognised = true;
    trial->items_whole = restored.items_whole;
    trial->content_bytes_lost = restored.bytes_lost;
    trial->blocks_mended = scrubbed.mended;
    trial->blocks_rebuilt = scrubbed.rebuilt;
    trial->blocks_lost = (run->report->file_bytes / FIRN_BLOCK_BYTES - 1) - (scrubbed.blocks - scrubbed.lost);
    trial->whole = differing == 0;
    /* a title page whose protected copy is lost stays as it is, and is said to be so */
    excused = trial->blocks_lost + (scrubbed.title == FIRN_SCRUB_TITLE_UNKNOWN);
    trial->blocks_wrong = differing > excused ? differing - excused : 0;
    return FIRN_OK;
}

static enum firn_status one_trial(struct run *run, uint64_t number, struct firn_fault *fault)
{
    const struct firn_drill_options *options = run->options;
    struct firn_drill_report *report = run->report;
    struct firn_drill_trial trial = { .number = number, .items = report->items };
    enum firn_status status = make_copy(run, fault);

    if (status == FIRN_OK)
        status = firn_damage_spoil(&options->damage, options->seed, number, &run->copy, options->memory,
                                   &trial.spoiled, fault);
    if (status == FIRN_OK)
        status = judge_copy(run, &trial, fault);
    if (status != FIRN_OK)
        return status;
    report->trials++;
    report->whole += trial.whole;
    if (trial.items_whole < report->least_items_whole)
        report->least_items_whole = trial.items_whole;
    if (options->trial != NULL)
        options->trial(options->self, &trial);
    return FIRN_OK;
}

enum firn_status firn_drill_store(const struct firn_drill_options *options, struct firn_store *original,
                                  struct firn_store *copy, struct firn_drill_report *report, struct firn_fault *fault)
{
    const struct firn_memory *memory = options->memory;
    struct run run = { .options = options, .report = report, .original = original, .copy = *copy };
    const char *wrong;
    enum firn_status status;

    *report = (struct firn_drill_report){ 0 };
    run.copy.sync = sync_nothing;
    firn_mend_scratch_make(options->scratch, memory, &run.journal);
    run.seen = memory->get(memory->self, PORTION_BYTES);
    run.good = memory->get(memory->self, PORTION_BYTES);
    status = run.seen == NULL || run.good == NULL ? firn_fault_tell(fault, FIRN_NO_MEMORY, 0, 0, "")
                                                  : look_at_original(&run, fault);
    if (status == FIRN_OK && firn_damage_check(&options->damage, report->file_bytes, &wrong) != FIRN_OK)
        status = firn_fault_tell(fault, FIRN_BAD_ARGUMENT, 0, 0, wrong);
    run.goal = 2 * report->file_bytes * options->trials;
    for (uint64_t i = 1; i <= options->trials && status == FIRN_OK; i++) {
        run.done = 2 * report->file_bytes * (i - 1);
        status = one_trial(&run, i, fault);
    }
    memory->put(memory->self, run.seen);
    memory->put(memory->self, run.good);
    return status;
}
