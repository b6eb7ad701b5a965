/* desk/command_pack.c - the "pack" command: words in, an intake into a writer, a view out */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "desk/commands.h"

#include "desk/events.h"
#include "desk/interrupt.h"
#include "desk/own_file.h"
#include "desk/pack_bags.h"
#include "desk/pack_words.h"
#include "desk/progress.h"
#include "desk/trouble.h"
#include "firn/expect.h"
#include "firn/intake.h"
#include "firn/readback.h"

#include <inttypes.h>
#include <stdlib.h>
#include <string.h>
#include <sys/stat.h>
#include <unistd.h>

enum option {
    OUTPUT,
    FROM_ARCHIVE,
    KEEP_BEGINNING,
    EXCLUDE,
    EXPECT,
    ACCESSION,
    TITLE,
    CUSTODIAN,
    NOTE,
    RESERVE,
    SHEET,
    EFFORT,
    NO_READER,
    REPLACE,
    NO_READ_BACK,
    EVENTS
};

static const struct firn_args_option options[] = {
    [OUTPUT] = { "output", 'o', "FILE", "the container to write; - is standard output" },
    [FROM_ARCHIVE] = { "from-archive", '\0', "A", "take in what archive A holds; - is standard input" },
    [KEEP_BEGINNING] = { "keep-beginning", '\0', NULL, "of a broken archive, keep what came before the break" },
    [EXCLUDE] = { "exclude", '\0', "PATTERN", "leave out what PATTERN names (may be given often)" },
    [EXPECT] = { "expect", '\0', "MANIFEST", "check the donor's SHA-256, SHA-512 or MD5 lines, refuse a mismatch" },
    [ACCESSION] = { "accession", '\0', "TEXT", "accession number, for the title page" },
    [TITLE] = { "title", '\0', "TEXT", "title of the collection" },
    [CUSTODIAN] = { "custodian", '\0', "TEXT", "who answers for it" },
    [NOTE] = { "note", '\0', "TEXT", "anything a later reader should know" },
    [RESERVE] = { "reserve", '\0', "PERCENT", "reserve on top of the data, 0 to 100 (default 14.3)" },
    [SHEET] = { "sheet", '\0', "SIZE", "size of a sheet, 1MiB to 256MiB (default 128MiB)" },
    [EFFORT] = { "effort", '\0', "WORD", "none, quick, normal or thorough (default normal)" },
    [NO_READER] = { "no-reader", '\0', NULL, "leave out the specification and the reader's source (some 200 KiB)" },
    [REPLACE] = { "replace", '\0', NULL, "FILE may be overwritten" },
    [NO_READ_BACK] = { "no-read-back", '\0', NULL, "do not read the container back when it is written" },
    [EVENTS] = { "events", '\0', "FILE", "append what was done as PREMIS events, JSON Lines" },
};

/* All that one run needs; freed in one place. */
struct packing {
    const struct firn_args *args;
    struct firn_view *view;
    const char *output;
    struct firn_progress progress;
    struct firn_fault fault;
    struct firn_store pipe, spool;
    bool pipe_open, spool_open;
    struct firn_store_stage *stage;
    struct firn_store *store;
    struct firn_writer *writer;
    struct firn_writer_options writing;
    struct firn_intake_options intake;
    struct firn_intake_report report;
    struct firn_intake_file own;
    struct firn_pattern *exclude;
    struct firn_expect *expect;
    uint64_t mismatches;
    struct firn_pack_bags bags;
    struct firn_writer_totals totals;
    bool read_back;
    struct firn_lines events;
    bool nothing;                  /* was there to store, so no container comes of it */
};

/* --- words --- */

/* Sources are never changed, so none of them may give way to the container, whatever --replace allows. */
static const char *source_in_the_way(const struct packing *p)
{
    const char *archive = p->args->values[FROM_ARCHIVE];

    if (archive != NULL)
        return firn_own_file_same(archive, p->output) ? archive : NULL;
    for (size_t i = 0; i < p->args->operand_count; i++)
        if (firn_own_file_same(p->args->operands[i], p->output))
            return p->args->operands[i];
    return NULL;
}

static int read_words(struct packing *p)
{
    const char *const *values = p->args->values;
    const struct firn_pack_words words = { p->output, values[RESERVE], values[SHEET], values[EFFORT] };

    if (p->output == NULL)
        return firn_trouble_usage(p->view, "--output", "is missing: say where to write the container");
    if ((p->args->operand_count == 0) == (values[FROM_ARCHIVE] == NULL))
        return firn_trouble_usage(p->view, "PATH", "name what to pack: paths, or one archive with --from-archive");
    if (source_in_the_way(p) != NULL)
        return firn_trouble_usage(p->view, source_in_the_way(p), "is what the container would be written over: name "
                                                                 "another file with --output");
    p->writing.carry_reader = !p->args->given[NO_READER];
    p->writing.title.accession = values[ACCESSION];
    p->writing.title.title = values[TITLE];
    p->writing.title.custodian = values[CUSTODIAN];
    p->writing.title.note = values[NOTE];
    return firn_pack_words(&words, &p->writing, p->view);
}

/* --- findings --- */

static void tell_finding(void *self, const struct firn_intake_finding *finding)
{
    static const struct { const char *kind, *words; } kinds[FIRN_INTAKE_KINDS] = {
        [FIRN_INTAKE_UNREADABLE] = { "unreadable", "cannot be read; left out" },
        [FIRN_INTAKE_VANISHED] = { "vanished", "was gone before it could be read; left out" },
        [FIRN_INTAKE_CHANGED] = { "changed", "changed while it was being read; left out" },
        [FIRN_INTAKE_UNSUPPORTED] = { "unsupported", "cannot be stored; left out" },
        [FIRN_INTAKE_DUPLICATE] = { "duplicate", "has the stored name of an earlier operand; left out" },
        [FIRN_INTAKE_ENCRYPTED] = { "encrypted", "is encrypted; left out" },
        [FIRN_INTAKE_DAMAGED] = { "damaged", "the archive is broken here" },
        [FIRN_INTAKE_PARTIAL] = { "partial", "stored without some of its metadata" },
        [FIRN_INTAKE_RENAMED] = { "renamed", "stored under a name without its dot-dot" },
        [FIRN_INTAKE_UNLINKED] = { "unlinked", "a hard link with bytes of its own; stored as a file" },
        [FIRN_INTAKE_SKIPPED] = { "skipped", "not stored again" },
    };
    struct packing *p = self;
    char words[512];
    struct firn_text text;

    firn_progress_wipe(&p->progress);
    firn_text_start(&text, words, sizeof words);
    firn_text_add(&text, "%s", kinds[finding->kind].words);
    if (finding->detail != NULL && finding->detail[0] != '\0')
        firn_text_add(&text, ": %s", finding->detail);
    if (finding->os_error != 0)
        firn_text_add(&text, " (%s)", strerror(finding->os_error));
    if (finding->kind < FIRN_INTAKE_PARTIAL)
        firn_view_finding(p->view, kinds[finding->kind].kind, finding->path, words);
    else
        firn_view_note(p->view, kinds[finding->kind].kind, finding->path, words);
}

static void see_item(void *self, const struct firn_intake_item *item)
{
    struct packing *p = self;
    enum firn_expect_verdict verdict = FIRN_EXPECT_UNLISTED;
    /* a bag in an archive has a folder around it, and its manifest is told from inside that */
    size_t own = p->args->values[FROM_ARCHIVE] != NULL ? strcspn(item->name, "/") : item->operand_bytes;

    firn_pack_bags_see(&p->bags, item);
    if (p->expect == NULL)
        return;
    if (item->sha256 != NULL && (item->link == NULL || firn_expect_digests(p->expect) == 0))
        verdict = firn_expect_see(p->expect, item->name, own, item->sha256, item->digests);
    else if (item->link != NULL)      /* of a link the others are not known; its file comes before it */
        verdict = firn_expect_see_link(p->expect, item->name, own, item->link);
    if (verdict != FIRN_EXPECT_MISMATCH)
        return;
    firn_progress_wipe(&p->progress);
    firn_view_finding(p->view, "mismatch", item->name, "is not what the manifest says it should be");
    p->mismatches++;
}

static void tell_missing(void *self, const char *path)
{
    struct packing *p = self;

    firn_view_finding(p->view, "missing", path, "is in the manifest, but was not found");
}

static void step(void *self, uint64_t items, uint64_t bytes)
{
    struct packing *p = self;

    firn_progress_step(&p->progress, items, bytes);
}

static void step_back(void *self, uint64_t blocks)
{
    struct packing *p = self;

    firn_progress_step(&p->progress, 0, blocks * 4096);
}

/* --- the work --- */

static enum firn_status open_output(struct packing *p)
{
    struct stat there;
    enum firn_status status;

    if (strcmp(p->output, "-") == 0) {
        firn_view_yield_output(p->view);
        status = firn_store_pipe(STDOUT_FILENO, p->writing.memory, &p->pipe);
        p->pipe_open = status == FIRN_OK;
        p->store = &p->pipe;
    } else {
        if (stat(p->output, &there) == 0) {
            p->own = (struct firn_intake_file){ .device = there.st_dev, .inode = there.st_ino };
            p->intake.own = &p->own;
            p->intake.own_count = 1;
        }
        status = firn_store_stage_open(p->output, p->args->given[REPLACE], p->writing.memory, &p->stage, &p->fault);
        if (status == FIRN_OK)
            p->store = firn_store_stage_store(p->stage);
    }
    if (status == FIRN_OK) {
        status = firn_store_temporary(NULL, p->writing.memory, &p->spool, &p->fault);
        p->spool_open = status == FIRN_OK;
    }
    p->writing.store = p->store;
    p->writing.spool = &p->spool;
    return status;
}

static enum firn_status prepare(struct packing *p)
{
    const char **list = calloc(p->args->all_count + 1, sizeof *list);
    size_t count;
    enum firn_status status;

    if (list == NULL)
        return FIRN_NO_MEMORY;
    count = firn_args_list(p->args, EXCLUDE, list);
    status = firn_pattern_make(list, count, p->writing.memory, &p->exclude);
    free(list);
    if (status == FIRN_OK && count > 0)
        p->intake.exclude = p->exclude;
    if (status == FIRN_OK && p->args->values[EXPECT] != NULL)
        status = firn_expect_open(p->args->values[EXPECT], p->writing.memory, &p->fault, &p->expect);
    if (status == FIRN_OK)
        status = firn_pack_bags_open(&p->bags, p->args, p->view, &p->fault);
    p->intake.digests = p->bags.digests | (p->expect == NULL ? 0 : firn_expect_digests(p->expect));
    return status;
}

/* Counts first, on a terminal only: then there is a goal to show. */
static uint64_t count_goal(struct packing *p)
{
    struct firn_intake_options counting = p->intake;
    struct firn_intake_report report;
    struct firn_fault fault;

    if (!p->progress.shown || p->args->values[FROM_ARCHIVE] != NULL)
        return 0;
    counting.finding = NULL;
    counting.item = NULL;
    counting.progress = NULL;
    return firn_intake_paths(NULL, p->args->operands, p->args->operand_count, &counting, &fault, &report) == FIRN_OK
               ? report.bytes : 0;
}

static enum firn_status take_in(struct packing *p)
{
    const char *archive = p->args->values[FROM_ARCHIVE];
    uint64_t goal;

    firn_progress_start(&p->progress, "packing", 0, p->args->quiet || p->args->json);
    goal = count_goal(p);
    firn_progress_start(&p->progress, "packing", goal, p->args->quiet || p->args->json);
    if (archive != NULL)
        return firn_intake_archive(p->writer, archive, &p->intake, &p->fault, &p->report);
    return firn_intake_paths(p->writer, p->args->operands, p->args->operand_count, &p->intake, &p->fault, &p->report);
}

static enum firn_status read_back(struct packing *p)
{
    struct firn_reader_options reading = {
        .store = p->store, .memory = p->writing.memory, .threads = p->args->threads, .stop = firn_interrupt_asked
    };
    enum firn_status status;

    if (p->stage == NULL || p->args->given[NO_READ_BACK])
        return FIRN_OK;
    firn_progress_wipe(&p->progress);
    firn_progress_start(&p->progress, "reading back", p->totals.container_bytes, p->args->quiet || p->args->json);
    status = firn_readback(&reading, &p->totals, step_back, p, &p->fault);
    p->read_back = status == FIRN_OK;
    return status;
}

/* Whether all is there, and as manifests have it; else what is not was told. */
static bool as_expected(struct packing *p)
{
    firn_progress_wipe(&p->progress);
    if (p->expect != NULL)
        p->mismatches += firn_expect_missing(p->expect, tell_missing, p);
    firn_pack_bags_judge(&p->bags);
    return p->mismatches + p->bags.troubles == 0;
}

/* An output that fails part way goes without a trace; only a pipe has had its bytes already. */
static enum firn_status pack(struct packing *p)
{
    enum firn_status status = prepare(p);

    if (status == FIRN_OK)
        status = open_output(p);
    if (status == FIRN_OK)
        status = firn_writer_make(&p->writing, &p->fault, &p->writer);
    if (status == FIRN_OK)
        status = take_in(p);
    if (status == FIRN_OK)
        status = p->bags.status;
    if (status == FIRN_OK && !as_expected(p))
        return FIRN_MISMATCH;
    p->nothing = status == FIRN_OK && p->report.items == 0;
    if (p->nothing)
        return FIRN_NO_INPUT;
    if (status == FIRN_OK)
        status = firn_writer_finish(p->writer, &p->totals);
    if (status == FIRN_OK)
        status = read_back(p);
    if (status == FIRN_OK && p->stage != NULL)
        status = firn_store_stage_keep(p->stage, &p->fault);
    return status;
}

static void show(struct packing *p)
{
    const struct firn_writer_totals *t = &p->totals;
    char heading[256], count[FIRN_TEXT_COUNT_ROOM], size[FIRN_TEXT_SIZE_ROOM], words[64];
    struct firn_text text;

    firn_text_start(&text, heading, sizeof heading);
    firn_text_add(&text, "packed %s items, %s, into ", firn_text_count(t->items, count),
                  firn_text_size(t->content_bytes, size));
    firn_text_add(&text, "%.100s", strcmp(p->output, "-") == 0 ? "standard output" : p->output);
    firn_view_begin(p->view, "pack", heading);
    firn_view_words(p->view, "container", NULL, p->output);
    firn_view_count(p->view, "items", NULL, t->items);
    firn_view_count(p->view, "withdrawn", t->withdrawn > 0 ? "withdrawn" : NULL, t->withdrawn);
    firn_view_bytes(p->view, "content-bytes", NULL, t->content_bytes);
    firn_view_bytes(p->view, "stored-bytes", t->stored_bytes != t->content_bytes ? "without holes" : NULL,
                    t->stored_bytes);
    firn_view_bytes(p->view, "coded-bytes", "coded", t->coded_bytes);
    firn_view_bytes(p->view, "catalogue-bytes", "catalogue", t->catalogue_bytes);
    firn_view_bytes(p->view, "container-bytes", "container", t->container_bytes);
    firn_pack_bags_show(&p->bags);
    firn_text_start(&text, words, sizeof words);
    firn_text_add(&text, "%s blocks, %.1f %% of them reserve", firn_text_count(t->blocks, count),
                  100.0 * (double)(t->blocks - t->data_blocks) / (double)t->blocks);
    firn_view_count(p->view, "blocks", NULL, t->blocks);
    firn_view_count(p->view, "data-blocks", NULL, t->data_blocks);
    if (!p->view->json)
        firn_view_words(p->view, "", "protection", words);
    firn_view_hex(p->view, "id", "identity", t->id, sizeof t->id);
    firn_view_hex(p->view, "catalogue-sha256", NULL, t->catalogue_sha256, sizeof t->catalogue_sha256);
    firn_view_switch(p->view, "read-back", p->read_back);
    if (!p->view->json)
        firn_view_words(p->view, "", "read back", p->read_back ? "as it was written" : "no");
    firn_view_end(p->view);
}

/* What of the input is not in the container decides the exit status: the container itself is good. */
static int intake_exit(const struct firn_intake_report *report)
{
    if (report->findings[FIRN_INTAKE_DAMAGED] > 0 || report->findings[FIRN_INTAKE_ENCRYPTED] > 0)
        return FIRN_EXIT_BAD_DATA;
    if (report->findings[FIRN_INTAKE_UNREADABLE] > 0 || report->findings[FIRN_INTAKE_VANISHED] > 0 ||
        report->findings[FIRN_INTAKE_UNSUPPORTED] > 0 || report->findings[FIRN_INTAKE_DUPLICATE] > 0)
        return FIRN_EXIT_NO_INPUT;
    return report->findings[FIRN_INTAKE_CHANGED] > 0 ? FIRN_EXIT_TRY_AGAIN : FIRN_EXIT_SOUND;
}

/* ---- events ---- */

static void record(struct packing *p, enum firn_events_type type, bool fine, const char *detail, const char *note)
{
    const char *archive = p->args->values[FROM_ARCHIVE];
    bool packing = type == FIRN_EVENTS_PACKING, digests = type == FIRN_EVENTS_DIGEST_CALCULATION;
    const struct firn_events_event event = {
        .type = type, .outcome = fine ? FIRN_EVENTS_SUCCESS : FIRN_EVENTS_FAILURE, .detail = detail, .note = note,
        .container = p->output, .made = packing, .id = p->totals.blocks > 0 ? p->totals.id : NULL,
        .others = archive != NULL ? &archive : p->args->operands,
        .other_count = !packing ? 0 : archive != NULL ? 1 : p->args->operand_count,
        .catalogue_sha256 = digests ? p->totals.catalogue_sha256 : NULL
    };

    firn_events_tell(&p->events, &event);
}

static void record_expectation(struct packing *p)
{
    bool fine = p->mismatches == 0;
    char detail[300];
    struct firn_text text;

    if (p->expect == NULL)
        return;
    firn_text_start(&text, detail, sizeof detail);
    firn_text_add(&text, "what was taken in, held against %.200s", p->args->values[EXPECT]);
    record(p, FIRN_EVENTS_FIXITY_CHECK, fine, detail, fine ? NULL : "not as the manifest says; nothing was written");
}

static void record_bags(struct packing *p)
{
    for (size_t i = 0; i < p->bags.count; i++) {
        const struct firn_pack_bag *bag = &p->bags.list[i];
        char detail[400];
        struct firn_text text;

        if (bag->bag == NULL)
            continue;
        firn_text_start(&text, detail, sizeof detail);
        firn_text_add(&text, "BagIt bag %.200s, by %s, while it was taken in", bag->operand, bag->report.algorithms);
        record(p, FIRN_EVENTS_FIXITY_CHECK, bag->report.valid, detail,
               bag->report.valid ? NULL : "not complete or not valid; nothing was written");
    }
}

static void record_done(struct packing *p, int exit)
{
    char detail[120], note[120];
    struct firn_text text;

    record_expectation(p);
    record_bags(p);
    firn_text_start(&text, detail, sizeof detail);
    firn_text_add(&text, "%" PRIu64 " items, %" PRIu64 " bytes of content", p->totals.items, p->totals.content_bytes);
    firn_text_start(&text, note, sizeof note);
    firn_text_add(&text, "%" PRIu64 " items of the sources were left out", firn_intake_left_out(&p->report));
    record(p, FIRN_EVENTS_PACKING, exit == FIRN_EXIT_SOUND, detail, exit == FIRN_EXIT_SOUND ? NULL : note);
    record(p, FIRN_EVENTS_DIGEST_CALCULATION, true, "SHA-256 of every file, and of the catalogue that has them", NULL);
    if (p->read_back)
        record(p, FIRN_EVENTS_FIXITY_CHECK, true, "the container, read back when it was written", NULL);
}

static void close_all(struct packing *p)
{
    firn_writer_free(p->writer);
    firn_store_stage_close(p->stage);
    if (p->pipe_open)
        p->pipe.close(p->pipe.self);
    if (p->spool_open)
        p->spool.close(p->spool.self);
    firn_pattern_free(p->exclude);
    firn_expect_free(p->expect);
    firn_pack_bags_end(&p->bags);
}

static int run(const struct firn_args *args, struct firn_view *view)
{
    struct packing p = { .args = args, .view = view, .output = args->values[OUTPUT] };
    enum firn_status status;
    int exit;

    p.writing.memory = firn_memory_system();
    p.writing.threads = args->threads;
    p.writing.stop = firn_interrupt_asked;
    p.intake = (struct firn_intake_options){
        .memory = p.writing.memory, .keep_beginning = args->given[KEEP_BEGINNING], .self = &p, .finding = tell_finding,
        .item = see_item, .progress = step, .stop = firn_interrupt_asked
    };
    exit = read_words(&p);
    if (exit == FIRN_EXIT_SOUND)
        exit = firn_lines_open(&p.events, args->values[EVENTS], view);
    if (exit != FIRN_EXIT_SOUND)
        return exit;
    status = pack(&p);
    firn_progress_wipe(&p.progress);
    if (status == FIRN_OK) {
        show(&p);
        exit = intake_exit(&p.report);
        record_done(&p, exit);
    } else if (status == FIRN_MISMATCH && p.mismatches + p.bags.troubles > 0) {
        char words[160];
        struct firn_text text;

        firn_text_start(&text, words, sizeof words);
        firn_text_add(&text, "not as manifests say, %" PRIu64 " findings; nothing was written; ask the donor",
                      p.mismatches + p.bags.troubles);
        firn_view_finding(view, "refused", p.output, words);
        exit = FIRN_EXIT_BAD_DATA;
        record_expectation(&p);
        record_bags(&p);
        record(&p, FIRN_EVENTS_PACKING, false, NULL, words);
    } else if (p.nothing) {
        exit = intake_exit(&p.report) != FIRN_EXIT_SOUND ? intake_exit(&p.report) : FIRN_EXIT_NO_INPUT;
        firn_view_finding(view, "nothing", p.output, "not written: there was nothing to store; check the sources");
        record(&p, FIRN_EVENTS_PACKING, false, NULL, "there was nothing to store; nothing was written");
    } else {
        record(&p, FIRN_EVENTS_PACKING, false, NULL, firn_status_text(status));
        exit = firn_trouble_tell(view, p.fault.what[0] != '\0' ? NULL : p.output, status, &p.fault);
    }
    close_all(&p);
    return firn_lines_close(&p.events, exit);
}

const struct firn_command firn_command_pack = {
    .name = "pack",
    .summary = "take in folders or an archive, and write a container",
    .usage = "-o FILE [options] PATH...\n       firn pack -o FILE --from-archive A [options]",
    .about = "Stores what the paths name, with all below them and all their metadata: names,\n"
             "owners, modes, times, links, extended attributes, access lists, holes. The\n"
             "container is written under its name only when it is whole and was read back.\n"
             "A path that is a BagIt bag (RFC 8493) is refused if it is not complete and valid.\n"
             "The sources are not changed. Keep them until a second copy of the container\n"
             "lies elsewhere and a restore was tried; your institution's policy decides.\n\n"
             "With SOURCE_DATE_EPOCH set, the same input gives the same bytes.\n",
    .example = "  firn pack -o quay-1931.firn --accession 'MQ 1931/7' \\\n"
               "      --title 'Ledgers of Marrow Quay' /srv/intake/quay\n",
    .options = options, .option_count = sizeof options / sizeof options[0], .run = run
};
