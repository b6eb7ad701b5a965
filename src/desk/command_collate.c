/* desk/command_collate.c - the "collate" command: words in, sources to care one after the other, an account out */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "desk/commands.h"

#include "desk/events.h"
#include "desk/interrupt.h"
#include "desk/opening_store.h"
#include "desk/progress.h"
#include "desk/shelf.h"
#include "desk/trouble.h"
#include "firn/collate.h"

#include <errno.h>
#include <inttypes.h>
#include <string.h>
#include <sys/resource.h>
#include <sys/stat.h>
#include <unistd.h>

enum option { OUTPUT, REPLACE, REREAD, ID, SCRATCH, EVENTS };

static const struct firn_args_option options[] = {
    [OUTPUT] = { "output", 'o', "FILE", "the container; for several a folder, made if a / is behind its name" },
    [REPLACE] = { "replace", '\0', NULL, "files that are there may be overwritten" },
    [REREAD] = { "reread", '\0', "N", "read a damaged block again up to N times, 31 at most (default 0)" },
    [ID] = { "id", '\0', "HEX", "only the container with this identity (16 digits, see describe)" },
    [SCRATCH] = { "scratch", '\0', "DIR", "where temporary files go (default: TMPDIR, else /tmp)" },
    [EVENTS] = { "events", '\0', "FILE", "append what was done as PREMIS events, JSON Lines" },
};

enum { ID_BYTES = 8 };

_Static_assert(FIRN_COLLATE_CONTAINERS_MAX == 128, "what --help and a finding say");

struct collating {
    const struct firn_args *args;
    struct firn_view *view;
    struct firn_progress progress;
    struct firn_collate_options options;
    struct firn_collate *collate;
    struct firn_fault fault;
    enum firn_status status;           /* FIRN_OK until something ends the whole thing */
    const char *source;                /* at hand */
    uint64_t sources;
    bool trouble;                      /* a source that could not be opened, or not all of it be read */
    bool damaged, lost;
    bool made_folder;
    uint8_t id[ID_BYTES];
    struct firn_lines events;
};

static bool names_folder(const char *path)
{
    struct stat facts;
    size_t length = strlen(path);

    return (length > 0 && path[length - 1] == '/') || (stat(path, &facts) == 0 && S_ISDIR(facts.st_mode));
}

/* A folder that is named with a slash behind it is made if need be. */
static enum firn_status make_folder(struct collating *c)
{
    struct stat facts;

    if (!c->options.into_folder || stat(c->options.output, &facts) == 0)
        return FIRN_OK;
    c->made_folder = mkdir(c->options.output, S_IRWXU | S_IRWXG | S_IRWXO) == 0;
    if (c->made_folder)
        return FIRN_OK;
    c->fault.os_error = errno;
    return FIRN_CANNOT_CREATE;
}

static int read_words(struct collating *c)
{
    const char *const *values = c->args->values;
    uint64_t readings = 0;

    if (values[OUTPUT] == NULL || values[OUTPUT][0] == '\0')
        return firn_trouble_usage(c->view, "--output", "is missing: name the container to write, or a folder");
    if (c->args->operand_count == 0)
        return firn_trouble_usage(c->view, "SOURCE", "is missing: name copies, fragments, images or folders of them");
    if (values[REREAD] != NULL && (firn_text_parse_count(values[REREAD], &readings) != FIRN_OK || readings > 31))
        return firn_trouble_usage(c->view, values[REREAD], "is no number of readings from 0 to 31");
    if (values[ID] != NULL &&
        (strlen(values[ID]) != 2 * ID_BYTES || firn_text_parse_hex(values[ID], ID_BYTES, c->id) != FIRN_OK))
        return firn_trouble_usage(c->view, values[ID], "is no identity: 16 hexadecimal digits");
    c->options.output = values[OUTPUT];
    c->options.into_folder = names_folder(values[OUTPUT]);
    c->options.only_id = values[ID] != NULL ? c->id : NULL;
    c->options.readings = (unsigned)readings;
    c->options.replace = c->args->given[REPLACE];
    c->options.scratch = values[SCRATCH];
    return FIRN_EXIT_SOUND;
}

static void step(void *self, uint64_t done, uint64_t bytes)
{
    struct collating *c = self;

    c->progress.goal_bytes = bytes;
    firn_progress_step(&c->progress, 0, done);
}

/* --- sources --- */

static void tell_source(struct collating *c, const char *path, const struct firn_collate_source *source)
{
    char words[300], count[FIRN_TEXT_COUNT_ROOM];
    struct firn_text text;

    if (c->view->json) {
        firn_view_begin(c->view, "collate-source", NULL);
        firn_view_words(c->view, "source", NULL, path);
        firn_view_count(c->view, "bytes", NULL, source->bytes);
        firn_view_count(c->view, "unreadable-bytes", NULL, source->unreadable_bytes);
        firn_view_count(c->view, "good-blocks", NULL, source->good);
        firn_view_count(c->view, "damaged-blocks", NULL, source->damaged);
        firn_view_end(c->view);
    }
    firn_text_start(&text, words, sizeof words);
    if (source->unreadable_bytes > 0) {
        firn_text_add(&text, "%s bytes cannot be read; passed over",
                      firn_text_count(source->unreadable_bytes, count));
        firn_view_finding(c->view, "unreadable", path, words);
        c->damaged = true;
    } else if (source->good + source->damaged == 0) {
        firn_view_note(c->view, "nothing", path, "no block of a container is in there");
    }
}

static void take(void *self, const char *path)
{
    struct collating *c = self;
    struct firn_collate_source source;
    struct firn_store store;
    enum firn_status status;

    if (c->status != FIRN_OK || firn_interrupt_asked(NULL))
        return;
    c->fault = (struct firn_fault){ 0 };
    status = firn_opening_store(c->view, path, c->options.memory, &store, &c->fault);
    if (firn_interrupt_asked(NULL)) {      /* told of when all comes to its end */
        if (status == FIRN_OK)
            store.close(store.self);
        return;
    }
    if (status != FIRN_OK) {
        (void)firn_trouble_tell(c->view, path, status, &c->fault);
        c->trouble = true;
        return;
    }
    c->sources++;
    firn_progress_start(&c->progress, "collating", 0, c->args->quiet || c->args->json);
    c->status = firn_collate_take(c->collate, path, &store, &source, &c->fault);
    firn_progress_wipe(&c->progress);
    store.close(store.self);
    if (c->status == FIRN_OK)
        tell_source(c, path, &source);
}

static void tell_trouble(void *self, const char *path, int os_error)
{
    struct collating *c = self;
    struct firn_fault fault = { .os_error = os_error };

    (void)firn_trouble_tell(c->view, path, FIRN_NO_INPUT, &fault);
    c->trouble = true;
}

/* --- the account --- */

static void add_part(struct firn_text *text, bool *any, uint64_t count, const char *words)
{
    char number[FIRN_TEXT_COUNT_ROOM];

    if (count > 0)
        firn_text_add(text, "%s%s %s", *any ? ", " : "", firn_text_count(count, number), words);
    *any = *any || count > 0;
}

static void tell_share(void *self, const struct firn_collate_share *share)
{
    struct collating *c = self;
    char words[600];
    struct firn_text text;
    bool any = false;

    if (c->view->json) {
        firn_view_begin(c->view, "collate-share", NULL);
        firn_view_words(c->view, "source", NULL, share->source);
        firn_view_hex(c->view, "id", NULL, share->id, sizeof share->id);
        firn_view_count(c->view, "found", NULL, share->found);
        firn_view_count(c->view, "mended", NULL, share->mended);
        firn_view_count(c->view, "reread", NULL, share->reread);
        firn_view_count(c->view, "damaged", NULL, share->damaged);
        firn_view_count(c->view, "known", NULL, share->known);
        firn_view_end(c->view);
        return;
    }
    if (c->view->quiet)
        return;
    firn_text_start(&text, words, sizeof words);
    firn_text_add(&text, "gave ");
    firn_text_add_hex(&text, share->id, sizeof share->id);
    firn_text_add(&text, " ");
    add_part(&text, &any, share->found, "good blocks");
    add_part(&text, &any, share->mended, "mended by their lanes");
    add_part(&text, &any, share->reread, "right when read again");
    add_part(&text, &any, share->damaged, "damaged");
    add_part(&text, &any, share->known, "that were known");
    firn_view_line(c->view, share->source, words);
}

static void tell_container_json(struct firn_view *view, const struct firn_collate_container *told)
{
    static const char *const titles[] = { [FIRN_COLLATE_TITLE_PROTECTED] = "protected",
                                          [FIRN_COLLATE_TITLE_UNPROTECTED] = "unprotected",
                                          [FIRN_COLLATE_TITLE_NONE] = "none" };

    firn_view_begin(view, "collate", NULL);
    firn_view_words(view, "container", NULL, told->path == NULL ? "" : told->path);
    firn_view_hex(view, "id", NULL, told->id, sizeof told->id);
    firn_view_count(view, "blocks", NULL, told->blocks);
    firn_view_count(view, "found", NULL, told->found);
    firn_view_count(view, "mended", NULL, told->mended);
    firn_view_count(view, "reread", NULL, told->reread);
    firn_view_count(view, "voted", NULL, told->voted);
    firn_view_count(view, "rebuilt", NULL, told->rebuilt);
    firn_view_count(view, "lost", NULL, told->lost);
    firn_view_count(view, "contradicting", NULL, told->contradicting);
    firn_view_switch(view, "end-known", told->end_known);
    firn_view_words(view, "title-page", NULL, titles[told->title]);
    firn_view_end(view);
}

/* A container made of others is a replication; what had to be put right on the way is a recovery. */
static void record(struct collating *c, const struct firn_collate_container *told, bool whole)
{
    char note[200];
    struct firn_text text;
    struct firn_events_event event = {
        .type = FIRN_EVENTS_REPLICATION, .outcome = whole ? FIRN_EVENTS_SUCCESS : FIRN_EVENTS_FAILURE,
        .container = told->path == NULL ? c->options.output : told->path, .made = true, .id = told->id, .note = note,
        .detail = "put together block by block from all sources", .others = c->args->operands,
        .other_count = c->args->operand_count
    };

    firn_text_start(&text, note, sizeof note);
    firn_text_add(&text, "%" PRIu64 " blocks: %" PRIu64 " as they were found, %" PRIu64 " lost", told->blocks,
                  told->found, told->lost);
    firn_events_tell(&c->events, &event);
    if (told->mended + told->reread + told->voted + told->rebuilt + told->lost == 0)
        return;
    event.type = FIRN_EVENTS_RECOVERY;
    event.detail = "by the blocks' own check words, further readings, other copies, and the reserve";
    firn_text_start(&text, note, sizeof note);
    firn_text_add(&text, "%" PRIu64 " blocks mended, %" PRIu64 " right when read again, %" PRIu64 " put together, ",
                  told->mended, told->reread, told->voted);
    firn_text_add(&text, "%" PRIu64 " rebuilt, %" PRIu64 " lost", told->rebuilt, told->lost);
    firn_events_tell(&c->events, &event);
}

static void tell_container(void *self, const struct firn_collate_container *told)
{
    struct collating *c = self;
    char words[900], count[FIRN_TEXT_COUNT_ROOM];
    struct firn_text text;
    bool any = false, whole = told->path != NULL && told->lost == 0 && told->end_known;

    firn_progress_wipe(&c->progress);
    c->lost = c->lost || !whole;
    record(c, told, whole);
    c->damaged = c->damaged || told->mended + told->reread + told->voted + told->rebuilt + told->contradicting > 0;
    if (c->view->json) {
        tell_container_json(c->view, told);
        return;
    }
    firn_text_start(&text, words, sizeof words);
    if (told->path == NULL) {
        firn_text_add_hex(&text, told->id, sizeof told->id);
        firn_view_finding(c->view, "beyond-repair", words,
                          "only damaged blocks of it were found, none that can be trusted; nothing written");
        return;
    }
    firn_text_add(&text, "%s blocks: ", firn_text_count(told->blocks, count));
    add_part(&text, &any, told->found, "as they were found");
    add_part(&text, &any, told->mended, "mended by their lanes");
    add_part(&text, &any, told->reread, "right when read again");
    add_part(&text, &any, told->voted, "put together from damaged copies");
    add_part(&text, &any, told->rebuilt, "rebuilt from the reserve");
    add_part(&text, &any, told->lost, "LOST");
    if (!told->end_known)
        firn_text_add(&text, "; its end is MISSING");
    firn_text_add(&text, whole ? "; whole" : "; look for another copy");
    if (told->title == FIRN_COLLATE_TITLE_UNPROTECTED)
        firn_text_add(&text, "; its title page cannot be checked");
    if (told->title == FIRN_COLLATE_TITLE_NONE)
        firn_text_add(&text, "; its title page is lost");
    if (told->contradicting > 0)
        firn_text_add(&text, "; %s good blocks of some source say something else: are these copies of one container?",
                      firn_text_count(told->contradicting, count));
    if (!whole || !c->view->quiet)
        firn_view_line(c->view, told->path, words);
}

static int tell_end(struct collating *c)
{
    char words[600];
    struct firn_text text;

    if (c->status == FIRN_BAD_ARGUMENT) {
        firn_text_start(&text, words, sizeof words);
        firn_text_add(&text, "holds blocks of more than one container (%s): name a folder with --output, or choose "
                             "one with --id; nothing written", c->fault.what);
        firn_view_finding(c->view, "several", c->source, words);
        return FIRN_EXIT_USAGE;
    }
    if (c->status == FIRN_NOT_CONTAINER) {
        firn_view_finding(c->view, "nothing", c->options.output,
                          "not written: no block of a container is in any source; try other copies");
        return c->trouble ? FIRN_EXIT_NO_INPUT : FIRN_EXIT_BAD_DATA;
    }
    if (c->status == FIRN_OVER_LIMIT) {
        firn_view_finding(c->view, "over-limit", c->options.output,
                          "not written: more than 128 containers are in these sources; take fewer sources at a time, "
                          "or a part of an image, or choose one with --id");
        return firn_trouble_exit(c->status);
    }
    if (c->status != FIRN_OK)
        return firn_trouble_tell(c->view, NULL, c->status, &c->fault);
    if (c->lost)
        return FIRN_EXIT_LOST;
    if (c->trouble)
        return FIRN_EXIT_NO_INPUT;
    return c->damaged ? FIRN_EXIT_SAFE : FIRN_EXIT_SOUND;
}

static void take_all(struct collating *c)
{
    for (size_t i = 0; i < c->args->operand_count && c->status == FIRN_OK; i++) {
        enum firn_status status;

        c->source = c->args->operands[i];
        status = firn_shelf_files(c->source, take, tell_trouble, c);
        if (c->status == FIRN_OK && status != FIRN_OK) {
            c->status = status;
            c->fault = (struct firn_fault){ 0 };
        }
        if (c->status == FIRN_OK && firn_interrupt_asked(NULL))
            c->status = FIRN_STOPPED;
    }
}

/* Every container that is found has files open to the end: as many as the system lets us have without asking. */
static void allow_files(void)
{
    struct rlimit files;

    if (getrlimit(RLIMIT_NOFILE, &files) == 0 && files.rlim_cur < files.rlim_max) {
        files.rlim_cur = files.rlim_max;
        (void)setrlimit(RLIMIT_NOFILE, &files);
    }
}

static int run(const struct firn_args *args, struct firn_view *view)
{
    struct collating c = { .args = args, .view = view };
    int exit;

    c.options = (struct firn_collate_options){
        .memory = firn_memory_system(), .threads = args->threads, .self = &c, .stop = firn_interrupt_asked,
        .progress = step, .share = tell_share, .container = tell_container
    };
    exit = read_words(&c);
    if (exit != FIRN_EXIT_SOUND)
        return exit;
    exit = firn_lines_open(&c.events, args->values[EVENTS], view);
    if (exit != FIRN_EXIT_SOUND)
        return exit;
    allow_files();
    c.status = make_folder(&c);
    if (c.status != FIRN_OK)
        return firn_lines_close(&c.events, firn_trouble_tell(view, c.options.output, c.status, &c.fault));
    c.status = firn_collate_open(&c.options, &c.collate, &c.fault);
    if (c.status == FIRN_OK)
        take_all(&c);
    if (c.status == FIRN_OK) {
        firn_progress_start(&c.progress, "putting together", 0, args->quiet || args->json);
        c.status = firn_collate_finish(c.collate, &c.fault);
        firn_progress_wipe(&c.progress);
    }
    exit = tell_end(&c);
    firn_collate_free(c.collate);
    if (c.made_folder)
        (void)rmdir(c.options.output);      /* if nothing went into it */
    return firn_lines_close(&c.events, exit);
}

const struct firn_command firn_command_collate = {
    .name = "collate",
    .summary = "the best container out of any copies, fragments or raw images",
    .usage = "-o FILE SOURCE... [options]",
    .about = "Takes every good block from wherever it is: copies of a container, pieces of one, raw\n"
             "images of a medium whose file system is gone, folders of such files, devices. Blocks\n"
             "may lie at any byte. Damaged ones are mended by their lanes, by the majority of their\n"
             "copies, and from the reserve; their own hashes decide. The result is the container as\n"
             "it was written, or as much of it as exists: what is lost stays lost, and a later\n"
             "scrub or restore says so.\n\n"
             "Several containers are told apart by their identity. -o FILE takes one; when there\n"
             "are more, name a folder: each goes into it as IDENTITY.firn, up to 128 at a time.\n\n"
             "Sources are only read, and once but for --reread. Temporary files take eight\n"
             "bytes for each block and 4 KiB for each damaged one. Work on images of a failing\n"
             "medium, not on the medium: each reading may be its last.\n\n"
             "Exit status: 0 all sources were sound; 1 something was damaged, the result is whole;\n"
             "2 blocks are lost; 66 the result is whole, but a source could not be opened.\n",
    .example = "  firn collate -o quay-1931.firn copy-a.firn copy-b.firn\n"
               "  firn collate -o found/ disk.img /srv/fragments\n",
    .options = options, .option_count = sizeof options / sizeof options[0], .run = run
};
