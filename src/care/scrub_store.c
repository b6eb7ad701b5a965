/* care/scrub_store.c - scrub of a store: sheet by sheet checked, mended, and mended in place */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "care/scrub_store.h"

#include "base/bytes.h"
#include "base/fault.h"
#include "container/sheets.h"

struct run {
    const struct firn_scrub_options *options;
    struct firn_mend_subject subject;
    struct firn_sheets_options sheets_options;
    struct firn_sheets *sheets;
    struct firn_scrub_report *report;
    uint64_t first_block;               /* to be checked */
    bool repairing;                     /* until something stands in the way */
    /* what did, first; checking goes on all the same */
    enum firn_status trouble;
    struct firn_fault trouble_fault;
    uint64_t lost_first, lost_count;    /* a run of lost blocks that may go on */
};

/* Whether a scrub that meets this can only stop. */
static bool fatal(enum firn_status status)
{
    return status == FIRN_NO_MEMORY || status == FIRN_STOPPED;
}

static void note_trouble(struct run *run, enum firn_status status, const struct firn_fault *fault)
{
    if (run->trouble != FIRN_OK)
        return;
    run->trouble = status;
    run->trouble_fault = *fault;
}

/* --- repairs --- */

/* Takes in what a repair has come to. Returns only what is fatal. */
static enum firn_status conclude(struct run *run, enum firn_status status, const struct firn_mend_outcome *outcome,
                                 struct firn_fault *fault)
{
    run->report->written += outcome->written;
    run->report->refused += outcome->refused;
    if (fatal(status))
        return status;
    if (status != FIRN_OK) {
        run->repairing = false;
        note_trouble(run, status, fault);
    } else if (outcome->refused > 0) {
        (void)firn_fault_tell(fault, FIRN_IO, outcome->os_error, outcome->refused_at, run->options->path);
        note_trouble(run, FIRN_IO, fault);
    }
    return FIRN_OK;
}

/* What a sheet has to be repaired with; blocks that are sound or lost stay as they are. */
static enum firn_status gather(struct firn_mend *mend, const uint8_t *blocks, const enum firn_sheets_finding *findings,
                               uint64_t first, uint32_t count, struct firn_fault *fault)
{
    enum firn_status status = FIRN_OK;

    for (uint32_t i = 0; i < count && status == FIRN_OK; i++)
        if (findings[i] == FIRN_SHEETS_MENDED || findings[i] == FIRN_SHEETS_REBUILT)
            status = firn_mend_add(mend, firn_sheets_place(first + i), blocks + (size_t)i * FIRN_BLOCK_BYTES, fault);
    return status;
}

static enum firn_status repair_sheet(struct run *run, const uint8_t *blocks, const enum firn_sheets_finding *findings,
                                     uint64_t first, uint32_t count, struct firn_fault *fault)
{
    struct firn_mend_outcome outcome = { 0 };
    struct firn_mend *mend;
    enum firn_status status = firn_mend_begin(&run->subject, run->report->id, fault, &mend);

    if (status == FIRN_OK)
        status = gather(mend, blocks, findings, first, count, fault);
    if (status == FIRN_OK)
        status = firn_mend_finish(mend, &outcome, fault);
    firn_mend_free(mend);
    return conclude(run, status, &outcome, fault);
}

/* --- findings --- */

static void tell_lost(struct run *run)
{
    if (run->lost_count > 0 && run->options->lost != NULL)
        run->options->lost(run->options->self, run->lost_first, run->lost_count);
    run->lost_count = 0;
}

static void add_lost(struct run *run, uint64_t number)
{
    if (run->lost_count == 0 || number != run->lost_first + run->lost_count) {
        tell_lost(run);
        run->lost_first = number;
    }
    run->lost_count++;
}

/* In how many bits the block on the medium differs from the good one. */
static unsigned stray_bits(const struct run *run, uint64_t number, const uint8_t *good)
{
    struct firn_store *store = run->subject.container;
    uint8_t found[FIRN_BLOCK_BYTES];
    unsigned bits = 0;
    size_t got;
    int why;

    if (store->read_at(store->self, firn_sheets_place(number), found, sizeof found, &got, &why) != FIRN_OK
        || got < sizeof found)
        return 0;
    for (size_t i = 0; i < sizeof found; i += 8)
        for (uint64_t odd = firn_bytes_get64(found + i) ^ firn_bytes_get64(good + i); odd != 0; odd &= odd - 1)
            bits++;
    return bits;
}

static void tell_found(const struct run *run, uint64_t number, enum firn_scrub_found what)
{
    if (run->options->found != NULL)
        run->options->found(run->options->self, number, what);
}

/* Counts what a sheet was found to be. Returns how many of its blocks can be repaired. */
static uint64_t count_findings(struct run *run, const uint8_t *blocks, const enum firn_sheets_finding *findings,
                               uint64_t first, uint32_t count)
{
    struct firn_scrub_report *report = run->report;
    uint64_t before = report->mended + report->rebuilt;

    for (uint32_t i = 0; i < count; i++)
        switch (findings[i]) {
        case FIRN_SHEETS_MENDED:
            report->mended++;
            report->mended_bits += stray_bits(run, first + i, blocks + (size_t)i * FIRN_BLOCK_BYTES);
            tell_found(run, first + i, FIRN_SCRUB_MENDED);
            break;
        case FIRN_SHEETS_REBUILT:
            report->rebuilt++;
            tell_found(run, first + i, FIRN_SCRUB_REBUILT);
            break;
        case FIRN_SHEETS_LOST:
            report->lost++;
            add_lost(run, first + i);
            tell_found(run, first + i, FIRN_SCRUB_LOST);
            break;
        default:
            break;
        }
    return report->mended + report->rebuilt - before;
}

static enum firn_status scrub_sheet(struct run *run, uint64_t index, struct firn_fault *fault)
{
    const enum firn_sheets_finding *findings;
    struct firn_sheet_shape shape;
    const uint8_t *blocks;
    enum firn_status status;
    uint64_t first;
    uint32_t count, missing;
    bool clean;

    firn_sheets_shape(run->sheets, index, &shape, &first);
    if (first < run->first_block)
        return FIRN_OK;
    count = shape.data_blocks + shape.reserve_blocks;
    status = firn_sheets_check(run->sheets, index, &clean);
    if (status == FIRN_OK && !clean) {
        status = firn_sheets_mend(run->sheets, index, &blocks, &findings, &missing);
        if (status == FIRN_OK) {
            run->report->unreadable += missing;
            if (count_findings(run, blocks, findings, first, count) > 0 && run->repairing)
                status = repair_sheet(run, blocks, findings, first, count, fault);
        }
    }
    if (status != FIRN_OK)
        return firn_fault_tell(fault, status, 0, firn_sheets_place(first), run->options->path);
    run->report->checked += count;
    run->report->reached = first + count;
    if (run->options->progress != NULL)
        run->options->progress(run->options->self, run->report->checked, run->report->blocks);
    return FIRN_OK;
}

/* --- the title page --- */

static enum firn_status heal_title(struct run *run, const uint8_t *page, struct firn_fault *fault)
{
    struct firn_mend_outcome outcome = { 0 };
    struct firn_mend *mend;
    enum firn_status status = firn_mend_begin(&run->subject, run->report->id, fault, &mend);

    if (status == FIRN_OK)
        status = firn_mend_add(mend, 0, page, fault);
    if (status == FIRN_OK)
        status = firn_mend_finish(mend, &outcome, fault);
    firn_mend_free(mend);
    if (outcome.written > 0)
        run->report->title = FIRN_SCRUB_TITLE_HEALED;
    return conclude(run, status, &outcome, fault);
}

/* Page 0 has no tag; the stream, which is as good by now as it will get, tells what it should be, and where it ends. */
static enum firn_status scrub_title(struct run *run, struct firn_fault *fault)
{
    struct firn_reader_options options = {
        .store = run->subject.container, .memory = run->subject.memory, .threads = run->options->threads,
        .stop = run->options->stop, .stop_self = run->options->self
    };
    uint8_t page[FIRN_BLOCK_BYTES];
    struct firn_reader *reader;
    enum firn_status status = firn_reader_open(&options, fault, &reader);

    if (status != FIRN_OK)
        return status;
    run->report->end_known = firn_reader_layout_of(reader)->end_known;      /* a last sheet that is full cannot tell */
    if (firn_reader_layout_of(reader)->title_sound)
        run->report->title = FIRN_SCRUB_TITLE_SOUND;
    else if (firn_reader_title_page(reader, page) == FIRN_OK)
        run->report->title = FIRN_SCRUB_TITLE_DAMAGED;
    firn_reader_free(reader);
    if (run->report->title == FIRN_SCRUB_TITLE_DAMAGED && run->repairing)
        return heal_title(run, page, fault);
    return FIRN_OK;
}

/* --- the whole --- */

static enum firn_status open_sheets(struct run *run, struct firn_fault *fault)
{
    const struct firn_reader_layout *layout;
    enum firn_status status = firn_sheets_open(&run->sheets_options, fault, &run->sheets);

    if (status != FIRN_OK)
        return firn_fault_tell(fault, status, fault != NULL ? fault->os_error : 0, 0, run->options->path);
    layout = firn_sheets_layout(run->sheets);
    memcpy(run->report->id, layout->id, sizeof run->report->id);
    run->report->geometry = layout->geometry;
    run->report->blocks = layout->blocks;
    run->report->end_known = layout->end_known;
    if (layout->blocks_missing == 0)      /* else it is a piece of its own */
        run->report->foreign_bytes = layout->foreign_bytes;
    return FIRN_OK;
}

/* Looks for what a repair that was cut off has left behind, and finishes it if that is allowed. */
static enum firn_status resume(struct run *run, struct firn_fault *fault)
{
    static const enum firn_scrub_journal found[] = {
        [FIRN_MEND_NONE] = FIRN_SCRUB_JOURNAL_NONE, [FIRN_MEND_UNSEALED] = FIRN_SCRUB_JOURNAL_DROPPED,
        [FIRN_MEND_SEALED] = FIRN_SCRUB_JOURNAL_REPLAYED, [FIRN_MEND_OTHER] = FIRN_SCRUB_JOURNAL_STRANGE,
        [FIRN_MEND_STRANGE] = FIRN_SCRUB_JOURNAL_STRANGE
    };
    struct firn_mend_outcome outcome = { 0 };
    enum firn_mend_state state;
    enum firn_status status;

    if (run->options->report_only) {
        status = firn_mend_look(&run->subject, run->report->id, &state, fault);
        run->report->journal = state == FIRN_MEND_UNSEALED || state == FIRN_MEND_SEALED ? FIRN_SCRUB_JOURNAL_WAITS
                                                                                        : found[state];
        return status == FIRN_IO ? FIRN_OK : status;      /* it would be in a repair's way, not in that of a look */
    }
    status = firn_mend_resume(&run->subject, run->report->id, &state, &outcome, fault);
    run->report->journal = found[state];
    status = conclude(run, status, &outcome, fault);
    run->report->replayed = run->report->written;
    run->report->written = 0;
    if (status != FIRN_OK || state != FIRN_MEND_SEALED)
        return status;
    firn_sheets_close(run->sheets);      /* the container is another one now */
    run->sheets = NULL;
    return open_sheets(run, fault);
}

static void count_extension(struct run *run)
{
    struct firn_store *store = run->subject.container;
    uint64_t bytes;
    int why;

    if (store->size(store->self, &bytes, &why) == FIRN_OK && bytes > run->report->file_bytes)
        run->report->extended_bytes = bytes - run->report->file_bytes;
}

static enum firn_status scrub_all(struct run *run, struct firn_fault *fault)
{
    uint64_t sheets;
    enum firn_status status = open_sheets(run, fault);

    if (status == FIRN_OK) {
        run->report->file_bytes = firn_sheets_layout(run->sheets)->file_bytes;
        status = resume(run, fault);
    }
    if (status == FIRN_OK) {
        if (run->options->begin_at != NULL)
            run->first_block = run->options->begin_at(run->options->self, run->report->id, run->report->blocks);
        run->report->reached = run->first_block;
        sheets = firn_sheets_layout(run->sheets)->sheets;
        for (uint64_t i = 0; i < sheets && status == FIRN_OK; i++)
            status = scrub_sheet(run, i, fault);
    }
    tell_lost(run);
    firn_sheets_close(run->sheets);      /* before a reader is made: never two sheets in memory */
    if (status == FIRN_OK)
        status = scrub_title(run, fault);
    count_extension(run);
    return status;
}

enum firn_status firn_scrub_store(const struct firn_scrub_options *options, struct firn_store *store,
                                  const struct firn_mend_place *place, struct firn_scrub_report *report,
                                  struct firn_fault *fault)
{
    struct firn_fault own = { 0 };
    struct run run = {
        .options = options, .subject = { store, place, options->memory }, .report = report,
        .sheets_options = { store, options->memory, options->threads, options->stop, options->self },
        .repairing = !options->report_only, .trouble = FIRN_OK
    };
    enum firn_status status;

    *report = (struct firn_scrub_report){ .title = FIRN_SCRUB_TITLE_UNKNOWN };
    status = scrub_all(&run, &own);
    if (status == FIRN_OK && run.trouble != FIRN_OK) {
        status = run.trouble;
        own = run.trouble_fault;
    }
    if (status == FIRN_OK)
        return FIRN_OK;
    if (own.what[0] == '\0')
        (void)firn_fault_tell(&own, status, own.os_error, own.at, options->path);
    if (fault != NULL)
        *fault = own;
    return status;
}
