/* desk/command_inventory.c - the "inventory" command: the catalogue as a list */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "desk/commands.h"

#include "desk/opening.h"
#include "desk/trouble.h"
#include "firn/about.h"
#include "firn/pattern.h"

#include <inttypes.h>
#include <time.h>

enum option { DIGESTS, NAMES };

static const struct firn_args_option options[] = {
    [DIGESTS] = { "digests", '\0', NULL, "with the SHA-256 of each file" },
    [NAMES] = { "names", '\0', NULL, "names only" },
};

struct listing {
    const struct firn_args *args;
    struct firn_view *view;
    struct firn_about *about;
    struct firn_pattern *patterns;
    uint64_t listed, bytes, unreadable;
};

static void put_name(const char *name)
{
    char buffer[32768];
    struct firn_text text;

    firn_text_start(&text, buffer, sizeof buffer);
    firn_text_add_name(&text, name);
    fputs(buffer, stdout);
}

static void format_time(int64_t seconds, char words[32])
{
    time_t when = (time_t)seconds;
    struct tm utc;

    words[0] = '\0';
    if (gmtime_r(&when, &utc) != NULL)
        strftime(words, 32, "%Y-%m-%dT%H:%M:%SZ", &utc);
}

static void list_words(const struct listing *l, const struct firn_item *item, const struct firn_about_facts *facts)
{
    char when[32], count[FIRN_TEXT_COUNT_ROOM];

    if (!l->args->given[NAMES]) {
        format_time(facts->mtime_seconds, when);
        printf("%c %04o %15s %s  ", facts->type == '-' ? 'f' : facts->type, facts->mode,
               item->has_content ? firn_text_count(item->bytes, count) : "-", when);
    }
    if (l->args->given[DIGESTS]) {
        char words[80] = "-";
        struct firn_text text;

        firn_text_start(&text, words, sizeof words);
        if (item->summed)
            firn_text_add_hex(&text, item->sha256, sizeof item->sha256);
        printf("%-64s  ", words[0] != '\0' ? words : "-");
    }
    put_name(facts->path);
    if (facts->link[0] != '\0' && !l->args->given[NAMES]) {
        fputs(facts->type == 'h' ? " same as " : " -> ", stdout);
        put_name(facts->link);
    }
    putchar('\n');
}

/* A decimal number: half a second before 1970 is stored as second -1 and half a second on from there. */
static void put_mtime(struct firn_view *view, const struct firn_about_facts *facts)
{
    int64_t seconds = facts->mtime_seconds;
    uint32_t nanoseconds = facts->mtime_nanoseconds;
    bool back = seconds < 0 && nanoseconds > 0;

    if (back) {
        seconds = -(seconds + 1);
        nanoseconds = 1000000000 - nanoseconds;
    }
    fprintf(view->out, ",\"mtime\":%s%" PRId64 ".%09" PRIu32, back ? "-" : "", seconds, nanoseconds);
}

static void list_json(const struct listing *l, const struct firn_item *item, const struct firn_about_facts *facts)
{
    const char type[2] = { facts->type == '-' ? 'f' : facts->type, '\0' };
    struct firn_view *view = l->view;

    firn_view_begin(view, "item", NULL);
    firn_view_count(view, "number", NULL, item->number);
    firn_view_words(view, "path", NULL, facts->path);
    firn_view_words(view, "type", NULL, type);
    firn_view_count(view, "mode", NULL, facts->mode);
    firn_view_count(view, "uid", NULL, facts->uid);
    firn_view_count(view, "gid", NULL, facts->gid);
    firn_view_words(view, "user", NULL, facts->user);
    firn_view_words(view, "group", NULL, facts->group);
    put_mtime(view, facts);
    if (facts->link[0] != '\0')
        firn_view_words(view, "link", NULL, facts->link);
    if (item->has_content) {
        firn_view_count(view, "bytes", NULL, item->bytes);
        firn_view_count(view, "stored-bytes", NULL, item->stored_bytes);
    }
    if (item->summed)
        firn_view_hex(view, "sha256", NULL, item->sha256, sizeof item->sha256);
    firn_view_count(view, "attributes", NULL, facts->attributes);
    firn_view_switch(view, "access-list", facts->access_list);
    firn_view_end(view);
}

static enum firn_status list_item(void *self, const struct firn_item *item, uint64_t foreseen)
{
    struct listing *l = self;
    struct firn_about_facts facts;
    enum firn_status status = firn_about_read(l->about, item, &facts);

    (void)foreseen;
    if (status == FIRN_BAD_DATA) {
        l->unreadable++;
        return FIRN_OK;
    }
    if (status != FIRN_OK)
        return status;
    if (l->patterns != NULL && !firn_pattern_match(l->patterns, facts.path))
        return FIRN_OK;
    l->listed++;
    l->bytes += item->bytes;
    if (l->view->json)
        list_json(l, item, &facts);
    else
        list_words(l, item, &facts);
    return ferror(stdout) ? FIRN_IO : FIRN_OK;
}

static int list(struct listing *l, struct firn_opening *opening)
{
    struct firn_reader_visitor visitor = {
        .self = l, .begin = list_item, .digests = l->args->given[DIGESTS] || l->view->json
    };
    const char *container = l->args->operands[0];
    int exit = firn_opening_look(l->view, container, opening);
    struct firn_reader_walk_report report;
    struct firn_fault fault = { 0 };
    enum firn_status status = firn_reader_walk(opening->reader, &visitor, &fault, &report);
    char words[100];
    struct firn_text text;

    if (status == FIRN_IO && ferror(stdout))
        return FIRN_EXIT_IO;           /* nothing is wrong with the container; main tells of the output */
    if (status != FIRN_OK)
        return firn_trouble_tell(l->view, container, status, &fault);
    for (size_t i = 0; i + 1 < l->args->operand_count; i++)
        if (!firn_pattern_used(l->patterns, i)) {
            firn_view_finding(l->view, "no-match", l->args->operands[i + 1], "chooses nothing in this container");
            exit = exit < FIRN_EXIT_LOST ? FIRN_EXIT_NO_INPUT : exit;
        }
    if (report.items_unknown + l->unreadable > 0) {
        firn_text_start(&text, words, sizeof words);
        firn_text_add(&text, "%" PRIu64 " catalogue entries are lost", report.items_unknown + l->unreadable);
        firn_view_finding(l->view, "lost", container, words);
        exit = FIRN_EXIT_LOST;
    }
    return exit;
}

static int run(const struct firn_args *args, struct firn_view *view)
{
    struct listing l = { .args = args, .view = view };
    struct firn_opening opening;
    enum firn_status status;
    int exit;

    if (args->operand_count == 0)
        return firn_trouble_usage(view, "FILE", "is missing: name the container");
    exit = firn_opening_make(&opening, args->operands[0], args, view);
    if (exit != FIRN_EXIT_SOUND)
        return exit;
    status = firn_about_make(firn_memory_system(), &l.about);
    if (status == FIRN_OK && args->operand_count > 1)
        status = firn_pattern_make(args->operands + 1, args->operand_count - 1, firn_memory_system(), &l.patterns);
    exit = status == FIRN_OK ? list(&l, &opening) : firn_trouble_tell(view, args->operands[0], status, NULL);
    firn_pattern_free(l.patterns);
    firn_about_free(l.about);
    return firn_opening_leave(&opening, exit);
}

const struct firn_command firn_command_inventory = {
    .name = "inventory",
    .summary = "list the items of a container",
    .usage = "FILE [options] [PATTERN...]",
    .about = "A line for each item: type, mode, size, time of last change, name. Types: f file,\n"
             "d folder, l symbolic link, h hard link, c and b devices, p named pipe. Only the\n"
             "catalogue is read.\n",
    .example = "  firn inventory quay-1931.firn --digests '*.tif'\n",
    .options = options, .option_count = sizeof options / sizeof options[0], .run = run
};
