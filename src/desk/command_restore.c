/* desk/command_restore.c - the "restore" command: words in, an outlet driven by a reader, a view out */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "desk/commands.h"

#include "desk/events.h"
#include "desk/interrupt.h"
#include "desk/loss.h"
#include "desk/opening.h"
#include "desk/own_file.h"
#include "desk/progress.h"
#include "desk/trouble.h"
#include "firn/outlet.h"

#include <errno.h>
#include <fcntl.h>
#include <inttypes.h>
#include <string.h>
#include <sys/stat.h>
#include <unistd.h>

enum option { DIRECTORY, TO_TAR, INCOMPLETE, REPLACE, OWNER, DEVICES, REREAD, REPORT, EVENTS };

static const struct firn_args_option options[] = {
    [DIRECTORY] = { "directory", 'C', "DIR", "restore into DIR, which is made if need be (default: here)" },
    [TO_TAR] = { "to-tar", '\0', "FILE", "write a pax archive instead; - is standard output" },
    [INCOMPLETE] = { "incomplete", '\0', "WORD", "keep: write what is left of a damaged item, gaps as zeros" },
    [REPLACE] = { "replace", '\0', NULL, "files that are there may be overwritten" },
    [OWNER] = { "owner", '\0', "WORD", "none, names or numbers (default names for root, else none)" },
    [DEVICES] = { "devices", '\0', NULL, "make device nodes too" },
    [REREAD] = { "reread", '\0', "N", "read a block that is not right again up to N times, 31 at most (default 0)" },
    [REPORT] = { "report", '\0', "FILE", "write the account of loss to FILE; JSON Lines with --json" },
    [EVENTS] = { "events", '\0', "FILE", "append what was done as PREMIS events, JSON Lines" },
};

struct restoring {
    const struct firn_args *args;
    struct firn_view *view;
    const char *container;
    struct firn_progress progress;
    struct firn_opening opening;
    struct firn_outlet_options outlet;
    struct firn_outlet_report report;
    struct firn_store_stage *stage;
    struct firn_loss loss;
    unsigned readings;
    struct firn_fault fault;
    struct firn_lines events;
};

static int read_words(struct restoring *r)
{
    const char *incomplete = r->args->values[INCOMPLETE], *owner = r->args->values[OWNER];
    const char *reread = r->args->values[REREAD];
    const char *const outputs[] = { r->args->values[TO_TAR], r->args->values[REPORT] };
    uint64_t readings = 0;

    if (r->args->operand_count == 0)
        return firn_trouble_usage(r->view, "FILE", "is missing: name the container");
    if (r->args->values[DIRECTORY] != NULL && r->args->values[TO_TAR] != NULL)
        return firn_trouble_usage(r->view, "--to-tar", "and --directory exclude each other");
    for (size_t i = 0; i < sizeof outputs / sizeof outputs[0]; i++)
        if (outputs[i] != NULL && firn_own_file_same(r->args->operands[0], outputs[i]))
            return firn_trouble_usage(r->view, outputs[i], "is the container itself: name another file");
    if (incomplete != NULL && strcmp(incomplete, "keep") != 0 && strcmp(incomplete, "skip") != 0)
        return firn_trouble_usage(r->view, incomplete, "is neither keep nor skip");
    r->outlet.keep_incomplete = incomplete != NULL && strcmp(incomplete, "keep") == 0;
    r->outlet.owner = geteuid() == 0 ? FIRN_OUTLET_OWNER_NAMES : FIRN_OUTLET_OWNER_NONE;
    if (owner != NULL && strcmp(owner, "none") == 0)
        r->outlet.owner = FIRN_OUTLET_OWNER_NONE;
    else if (owner != NULL && strcmp(owner, "names") == 0)
        r->outlet.owner = FIRN_OUTLET_OWNER_NAMES;
    else if (owner != NULL && strcmp(owner, "numbers") == 0)
        r->outlet.owner = FIRN_OUTLET_OWNER_NUMBERS;
    else if (owner != NULL)
        return firn_trouble_usage(r->view, owner, "is neither none, names nor numbers");
    if (reread != NULL && (firn_text_parse_count(reread, &readings) != FIRN_OK || readings > 31))
        return firn_trouble_usage(r->view, reread, "is no number of readings from 0 to 31");
    r->readings = (unsigned)readings;
    r->outlet.replace = r->args->given[REPLACE];
    r->outlet.devices = r->args->given[DEVICES];
    return FIRN_EXIT_SOUND;
}

static void lost_words(const struct firn_outlet_finding *finding, struct firn_text *text)
{
    char count[FIRN_TEXT_COUNT_ROOM];

    firn_text_add(text, "%s of ", firn_text_count(finding->lost_bytes, count));
    firn_text_add(text, "%s bytes are lost", firn_text_count(finding->bytes, count));
    if (finding->range_count > 0 && finding->ranges[0].why == FIRN_READER_LOSS_WITHDRAWN) {
        firn_text_add(text, ": they could not be read when this was packed");
    } else if (finding->range_count > 0) {
        firn_text_add(text, ", from %" PRIu64, finding->ranges[0].at);
        if (finding->range_count > 1)
            firn_text_add(text, " in %" PRIu64 " stretches", finding->range_count);
        if (finding->ranges[0].container_at > 0)
            firn_text_add(text, "; first bad block at byte %" PRIu64 " of the container",
                          finding->ranges[0].container_at);
    }
    firn_text_add(text, finding->kept ? "; kept with zeros, see its .gaps" : "; not written");
}

static void tell_finding(void *self, const struct firn_outlet_finding *finding)
{
    static const struct { const char *kind, *words; } kinds[FIRN_OUTLET_KINDS] = {
        [FIRN_OUTLET_EXISTS] = { "exists", "is there already; not overwritten without --replace" },
        [FIRN_OUTLET_REFUSED] = { "refused", "refused" },
        [FIRN_OUTLET_LOST] = { "lost", "" },
        [FIRN_OUTLET_MISMATCH] = { "mismatch", "does not have the SHA-256 of the catalogue" },
        [FIRN_OUTLET_LINK] = { "link", "is a hard link to an item that was not restored whole" },
        [FIRN_OUTLET_FAILED] = { "failed", "cannot be written" },
        [FIRN_OUTLET_METADATA] = { "metadata", "is there, but not with all its metadata" },
    };
    struct restoring *r = self;
    char words[768];
    struct firn_text text;

    firn_progress_wipe(&r->progress);
    firn_loss_add(&r->loss, finding);
    firn_text_start(&text, words, sizeof words);
    firn_text_add(&text, "%s", kinds[finding->kind].words);
    if (finding->kind == FIRN_OUTLET_LOST)
        lost_words(finding, &text);
    if (finding->kind == FIRN_OUTLET_LINK)
        firn_text_add(&text, finding->kept ? "; made all the same" : "; not written");
    if (finding->detail != NULL && finding->detail[0] != '\0')
        firn_text_add(&text, ": %s", finding->detail);
    if (finding->os_error != 0)
        firn_text_add(&text, " (%s)", strerror(finding->os_error));
    if (finding->kind == FIRN_OUTLET_LOST && r->view->json) {
        firn_view_begin(r->view, "finding", NULL);
        firn_view_words(r->view, "kind", NULL, "lost");
        firn_view_words(r->view, "path", NULL, finding->path);
        firn_view_words(r->view, "words", NULL, words);
        firn_view_count(r->view, "item", NULL, finding->number);
        firn_view_switch(r->view, "kept", finding->kept);
        firn_loss_ranges(r->view, finding);
        firn_view_end(r->view);
    } else if (finding->kind < FIRN_OUTLET_METADATA) {
        firn_view_finding(r->view, kinds[finding->kind].kind, finding->path, words);
    } else {
        firn_view_note(r->view, kinds[finding->kind].kind, finding->path, words);
    }
}

static void step(void *self, uint64_t items, uint64_t bytes)
{
    struct restoring *r = self;

    firn_progress_step(&r->progress, items, bytes);
}

/* A tar file appears under its name only when it is whole, like everything else. */
static enum firn_status to_tar(struct restoring *r)
{
    const char *path = r->args->values[TO_TAR];
    enum firn_status status;
    int descriptor;

    if (strcmp(path, "-") == 0) {
        firn_view_yield_output(r->view);
        return firn_outlet_tar(r->opening.reader, STDOUT_FILENO, &r->outlet, &r->fault, &r->report);
    }
    status = firn_store_stage_open(path, r->args->given[REPLACE], r->outlet.memory, &r->stage, &r->fault);
    if (status != FIRN_OK)
        return status;
    descriptor = firn_store_stage_descriptor(r->stage);
    status = firn_outlet_tar(r->opening.reader, descriptor, &r->outlet, &r->fault, &r->report);
    return status == FIRN_OK ? firn_store_stage_keep(r->stage, &r->fault) : status;
}

static enum firn_status restore(struct restoring *r)
{
    const struct firn_reader_layout *layout = firn_reader_layout_of(r->opening.reader);
    const char *folder = r->args->values[DIRECTORY];
    enum firn_status status = FIRN_OK;
    struct firn_pattern *patterns = NULL;

    if (r->args->operand_count > 1)
        status = firn_pattern_make(r->args->operands + 1, r->args->operand_count - 1, r->outlet.memory, &patterns);
    r->outlet.patterns = patterns;
    firn_progress_start(&r->progress, "restoring", patterns == NULL ? layout->content_bytes : 0,
                        r->args->quiet || r->args->json);
    if (status == FIRN_OK && r->args->values[TO_TAR] != NULL)
        status = to_tar(r);
    else if (status == FIRN_OK)
        status = firn_outlet_folder(r->opening.reader, folder == NULL ? "." : folder, &r->outlet, &r->fault,
                                    &r->report);
    firn_progress_wipe(&r->progress);
    for (size_t i = 0; status == FIRN_OK && i + 1 < r->args->operand_count; i++)
        if (!firn_pattern_used(patterns, i)) {
            firn_view_finding(r->view, "no-match", r->args->operands[i + 1], "chooses nothing in this container");
            status = FIRN_NO_INPUT;
        }
    firn_pattern_free(patterns);
    r->outlet.patterns = NULL;
    return status;
}

static int outcome(const struct restoring *r, const struct firn_reader_damage *damage, int layout_exit)
{
    const uint64_t *findings = r->report.findings;

    if (findings[FIRN_OUTLET_LOST] > 0 || findings[FIRN_OUTLET_MISMATCH] > 0 || r->report.items_unknown > 0 ||
        layout_exit == FIRN_EXIT_LOST)
        return FIRN_EXIT_LOST;
    if (findings[FIRN_OUTLET_FAILED] > 0)
        return FIRN_EXIT_IO;
    if (findings[FIRN_OUTLET_EXISTS] > 0)
        return FIRN_EXIT_CANNOT_CREATE;
    if (findings[FIRN_OUTLET_REFUSED] > 0 || findings[FIRN_OUTLET_LINK] > 0)
        return FIRN_EXIT_BAD_DATA;
    return damage->mended > 0 || damage->rebuilt > 0 || damage->lost > 0 || layout_exit == FIRN_EXIT_SAFE ||
                   firn_opening_gained(&r->opening) > 0
               ? FIRN_EXIT_SAFE
               : FIRN_EXIT_SOUND;
}

static void show(struct restoring *r, const struct firn_reader_damage *damage)
{
    char heading[200], count[FIRN_TEXT_COUNT_ROOM], size[FIRN_TEXT_SIZE_ROOM];
    struct firn_text text;
    bool damaged = damage->mended + damage->rebuilt + damage->lost > 0;

    firn_text_start(&text, heading, sizeof heading);
    firn_text_add(&text, "restored %s items, %s", firn_text_count(r->report.written, count),
                  firn_text_size(r->report.bytes, size));
    firn_view_begin(r->view, "restore", heading);
    firn_view_words(r->view, "container", NULL, r->container);
    firn_view_count(r->view, "chosen", NULL, r->report.chosen);
    firn_view_count(r->view, "written", NULL, r->report.written);
    firn_view_count(r->view, "kept-incomplete", r->report.kept > 0 ? "incomplete" : NULL, r->report.kept);
    firn_view_bytes(r->view, "bytes", NULL, r->report.bytes);
    firn_view_count(r->view, "lost-items", r->report.findings[FIRN_OUTLET_LOST] > 0 ? "lost items" : NULL,
                    r->report.findings[FIRN_OUTLET_LOST]);
    firn_view_bytes(r->view, "lost-bytes", r->report.lost_bytes > 0 ? "lost" : NULL, r->report.lost_bytes);
    firn_view_count(r->view, "unknown-items", r->report.items_unknown > 0 ? "unknown items" : NULL,
                    r->report.items_unknown);
    firn_view_count(r->view, "blocks-mended", damaged ? "mended" : NULL, damage->mended);
    firn_view_count(r->view, "blocks-rebuilt", damaged ? "rebuilt" : NULL, damage->rebuilt);
    firn_view_count(r->view, "blocks-lost", damaged ? "lost blocks" : NULL, damage->lost);
    firn_view_count(r->view, "blocks-reread", firn_opening_gained(&r->opening) > 0 ? "reread" : NULL,
                    firn_opening_gained(&r->opening));
    firn_view_end(r->view);
}

/* Blocks that were put right in memory are a recovery; what was given back is an unpacking. */
static void record(struct restoring *r, const struct firn_reader_damage *damage, enum firn_status status, int exit)
{
    const char *place = r->args->values[TO_TAR] != NULL ? r->args->values[TO_TAR] : r->args->values[DIRECTORY];
    char detail[120], note[160];
    struct firn_text text;
    bool fine = exit == FIRN_EXIT_SOUND || exit == FIRN_EXIT_SAFE;
    struct firn_events_event event = {
        .type = FIRN_EVENTS_RECOVERY, .outcome = damage->lost == 0 ? FIRN_EVENTS_SUCCESS : FIRN_EVENTS_FAILURE,
        .container = r->container, .id = firn_reader_layout_of(r->opening.reader)->id, .note = note,
        .detail = "on reading, in memory; the container itself was not written to"
    };

    firn_text_start(&text, note, sizeof note);
    firn_text_add(&text, "%" PRIu64 " blocks mended, %" PRIu64 " rebuilt, %" PRIu64 " lost", damage->mended,
                  damage->rebuilt, damage->lost);
    if (damage->mended + damage->rebuilt + damage->lost > 0)
        firn_events_tell(&r->events, &event);
    place = place == NULL ? "." : place;
    event.type = FIRN_EVENTS_UNPACKING;
    event.outcome = fine ? FIRN_EVENTS_SUCCESS : FIRN_EVENTS_FAILURE;
    event.others = &place;
    event.other_count = 1;
    event.detail = detail;
    firn_text_start(&text, detail, sizeof detail);
    firn_text_add(&text, "%" PRIu64 " items, %" PRIu64 " bytes", r->report.written, r->report.bytes);
    firn_text_start(&text, note, sizeof note);
    if (status != FIRN_OK)
        firn_text_add(&text, "%s", firn_status_text(status));
    else
        firn_text_add(&text, "%" PRIu64 " items not given back whole, %" PRIu64 " bytes lost",
                      r->report.findings[FIRN_OUTLET_LOST] + r->report.items_unknown, r->report.lost_bytes);
    event.note = fine ? NULL : note;
    firn_events_tell(&r->events, &event);
}

static int run(const struct firn_args *args, struct firn_view *view)
{
    struct restoring r = { .args = args, .view = view };
    struct firn_reader_damage damage;
    enum firn_status status;
    int exit, layout_exit;

    r.outlet = (struct firn_outlet_options){
        .memory = firn_memory_system(), .self = &r, .finding = tell_finding, .progress = step
    };
    exit = read_words(&r);
    if (exit != FIRN_EXIT_SOUND)
        return exit;
    r.container = args->operands[0];
    exit = firn_lines_open(&r.events, args->values[EVENTS], view);
    if (exit != FIRN_EXIT_SOUND)
        return exit;
    status = firn_loss_open(&r.loss, args->values[REPORT], r.container, &r.outlet, args->json, &r.fault);
    if (status != FIRN_OK)
        return firn_lines_close(&r.events, firn_trouble_tell(view, NULL, status, &r.fault));
    exit = firn_opening_make_patient(&r.opening, r.container, r.readings, args, view);
    if (exit != FIRN_EXIT_SOUND) {
        firn_loss_close(&r.loss);
        return firn_lines_close(&r.events, exit);
    }
    layout_exit = firn_opening_look(view, r.container, &r.opening);
    status = restore(&r);
    firn_reader_damage_so_far(r.opening.reader, &damage);
    if (status == FIRN_OK || status == FIRN_NO_INPUT) {
        enum firn_status kept = firn_loss_keep(&r.loss, &r.report, &r.fault);

        show(&r, &damage);
        if (kept != FIRN_OK)
            (void)firn_trouble_tell(view, NULL, kept, &r.fault);
        exit = outcome(&r, &damage, layout_exit);
        if (status == FIRN_NO_INPUT && exit < FIRN_EXIT_LOST)
            exit = FIRN_EXIT_NO_INPUT;
        if (kept != FIRN_OK && exit < FIRN_EXIT_LOST)
            exit = firn_trouble_exit(kept);
    } else {
        exit = firn_trouble_tell(view, r.fault.what[0] != '\0' ? NULL : r.container, status, &r.fault);
    }
    record(&r, &damage, status, exit);
    firn_loss_close(&r.loss);
    firn_store_stage_close(r.stage);
    firn_opening_close(&r.opening);
    return firn_lines_close(&r.events, exit);
}

const struct firn_command firn_command_restore = {
    .name = "restore",
    .summary = "give items back, repairing on the way",
    .usage = "FILE [-C DIR] [options] [PATTERN...]",
    .about = "Restores all items, or those that the patterns name, with all their metadata.\n"
             "Damaged blocks are repaired in memory; the container is not written to. Only\n"
             "what is proved whole by its hashes is given back; what is lost is listed, byte\n"
             "by byte with --json or --report. Nothing outside DIR is touched. Restore to a\n"
             "place of its own first and look at it before anything is replaced.\n\n"
             "FILE may be a device, a pipe, or - for standard input; what cannot be searched is\n"
             "copied to a temporary file first. Blocks that are not where they belong, since\n"
             "the head is missing or bytes were lost or put in, are found where they are.\n\n"
             "Exit status: 0 intact; 1 damage was met and everything was given back; 2 bytes\n"
             "are lost.\n",
    .example = "  firn restore quay-1931.firn -C /srv/reading-room 'quay/ledgers'\n"
               "  firn restore --reread 5 --incomplete keep --report lost.txt /dev/sdx -C rescued\n",
    .options = options, .option_count = sizeof options / sizeof options[0], .run = run
};
