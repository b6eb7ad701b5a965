/* desk/command_manifest.c - the "manifest" command: digests as BagIt lines, or a folder held against a container */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "desk/commands.h"

#include "desk/interrupt.h"
#include "desk/opening.h"
#include "desk/progress.h"
#include "desk/trouble.h"
#include "firn/manifest.h"

#include <inttypes.h>
#include <string.h>

enum option { CHECK, BELOW, ALGORITHM };

static const struct firn_args_option options[] = {
    [CHECK] = { "check", '\0', "DIR", "compare folder DIR with the container instead; restores nothing" },
    [BELOW] = { "below", '\0', "FOLDER", "only what lies below FOLDER, named from inside it" },
    [ALGORITHM] = { "algorithm", '\0', "WORD", "sha256, sha512 or md5 (default sha256, which takes no decoding)" },
};

struct listing {
    const struct firn_args *args;
    struct firn_view *view;
    const char *container;
    struct firn_progress progress;
    enum firn_manifest_algorithm algorithm;
    struct firn_manifest_choice choice;
};

static int read_algorithm(struct listing *l)
{
    static const enum firn_manifest_algorithm all[] = { FIRN_MANIFEST_SHA256, FIRN_MANIFEST_SHA512, FIRN_MANIFEST_MD5 };
    const char *word = l->args->values[ALGORITHM];

    if (word == NULL)
        return FIRN_EXIT_SOUND;
    if (l->args->values[CHECK] != NULL)
        return firn_trouble_usage(l->view, "--algorithm", "has no use with --check, which compares SHA-256");
    for (size_t i = 0; i < sizeof all / sizeof all[0]; i++)
        if (strcmp(word, firn_manifest_algorithm_name(all[i])) == 0) {
            l->algorithm = all[i];
            return FIRN_EXIT_SOUND;
        }
    return firn_trouble_usage(l->view, word, "is no algorithm: sha256, sha512 or md5");
}

static void step(void *self, uint64_t items, uint64_t bytes)
{
    struct listing *l = self;

    firn_progress_step(&l->progress, items, bytes);
}

/* ---- lines ---- */

static void tell_file(void *self, const struct firn_manifest_file *file)
{
    struct listing *l = self;
    char digest[2 * FIRN_MANIFEST_DIGEST_BYTES_MAX + 1];
    struct firn_text text;

    firn_progress_wipe(&l->progress);
    if (file->digest == NULL) {
        firn_view_finding(l->view, "untold", file->path,
                          "its digest cannot be told: content or catalogue is lost here; take another copy");
        return;
    }
    firn_text_start(&text, digest, sizeof digest);
    firn_text_add_hex(&text, file->digest, file->digest_bytes);
    if (!l->view->json) {
        printf("%s  %s\n", digest, file->escaped);
        return;
    }
    firn_view_begin(l->view, "manifest", NULL);
    firn_view_words(l->view, "path", NULL, file->path);
    firn_view_count(l->view, "bytes", NULL, file->bytes);
    firn_view_words(l->view, "algorithm", NULL, firn_manifest_algorithm_name(l->algorithm));
    firn_view_words(l->view, "digest", NULL, digest);
    firn_view_end(l->view);
}

/* What of the catalogue is gone cannot be listed or compared; that is said, and it counts as loss. */
static int tell_unknown(struct listing *l, uint64_t items_unknown, int exit)
{
    char words[100];
    struct firn_text text;

    if (items_unknown == 0)
        return exit;
    firn_text_start(&text, words, sizeof words);
    firn_text_add(&text, "%" PRIu64 " catalogue entries are lost; take another copy", items_unknown);
    firn_view_finding(l->view, "lost", l->container, words);
    return FIRN_EXIT_LOST;
}

static int list(struct listing *l, struct firn_opening *opening, int exit)
{
    const struct firn_manifest_options listing = {
        .memory = firn_memory_system(), .algorithm = l->algorithm, .choice = l->choice, .self = l, .file = tell_file,
        .progress = step
    };
    struct firn_manifest_report report;
    struct firn_fault fault = { 0 };
    enum firn_status status;

    firn_progress_start(&l->progress, "digesting", firn_reader_layout_of(opening->reader)->content_bytes,
                        l->args->quiet || l->args->json);
    status = firn_manifest_list(opening->reader, &listing, &fault, &report);
    firn_progress_wipe(&l->progress);
    if (status != FIRN_OK)
        return firn_trouble_tell(l->view, l->container, status, &fault);
    exit = report.untold > 0 ? FIRN_EXIT_LOST : exit;
    return tell_unknown(l, report.items_unknown, exit);
}

/* ---- comparing ---- */

static void tell_difference(void *self, const struct firn_manifest_finding *finding)
{
    static const struct { const char *kind, *words; } kinds[FIRN_MANIFEST_KINDS] = {
        [FIRN_MANIFEST_MISSING] = { "missing", "missing: in the container, not in the folder" },
        [FIRN_MANIFEST_EXTRA] = { "extra", "extra: in the folder, not in the container" },
        [FIRN_MANIFEST_CHANGED] = { "changed", "changed" },
        [FIRN_MANIFEST_UNREADABLE] = { "unreadable", "cannot be read" },
        [FIRN_MANIFEST_UNTOLD] = { "untold", "its digest is lost from the container; not compared" },
    };
    struct listing *l = self;
    char words[512];
    struct firn_text text;

    firn_progress_wipe(&l->progress);
    firn_text_start(&text, words, sizeof words);
    firn_text_add(&text, "%s", kinds[finding->kind].words);
    if (finding->detail[0] != '\0')
        firn_text_add(&text, ": %s", finding->detail);
    if (finding->os_error != 0)
        firn_text_add(&text, " (%s)", strerror(finding->os_error));
    firn_view_finding(l->view, kinds[finding->kind].kind, finding->path, words);
}

static void show_check(struct listing *l, const struct firn_manifest_check_report *report)
{
    const uint64_t *findings = report->findings;
    char heading[200], count[FIRN_TEXT_COUNT_ROOM], size[FIRN_TEXT_SIZE_ROOM];
    struct firn_text text;

    firn_text_start(&text, heading, sizeof heading);
    firn_text_add(&text, "compared %s items with the folder, ", firn_text_count(report->items, count));
    firn_text_add(&text, "%s read", firn_text_size(report->bytes, size));
    firn_view_begin(l->view, "manifest-check", heading);
    firn_view_words(l->view, "container", NULL, l->container);
    firn_view_words(l->view, "folder", NULL, l->args->values[CHECK]);
    firn_view_count(l->view, "items", NULL, report->items);
    firn_view_count(l->view, "alike", "alike", report->alike);
    firn_view_count(l->view, "missing", "missing", findings[FIRN_MANIFEST_MISSING]);
    firn_view_count(l->view, "extra", "extra", findings[FIRN_MANIFEST_EXTRA]);
    firn_view_count(l->view, "changed", "changed", findings[FIRN_MANIFEST_CHANGED]);
    firn_view_count(l->view, "unreadable", findings[FIRN_MANIFEST_UNREADABLE] > 0 ? "unreadable" : NULL,
                    findings[FIRN_MANIFEST_UNREADABLE]);
    firn_view_count(l->view, "untold", findings[FIRN_MANIFEST_UNTOLD] > 0 ? "untold" : NULL,
                    findings[FIRN_MANIFEST_UNTOLD]);
    firn_view_end(l->view);
}

static int check(struct listing *l, struct firn_opening *opening, int exit)
{
    const struct firn_manifest_check_options checking = {
        .memory = firn_memory_system(), .folder = l->args->values[CHECK], .choice = l->choice, .self = l,
        .finding = tell_difference, .progress = step, .stop = firn_interrupt_asked
    };
    struct firn_manifest_check_report report;
    struct firn_fault fault = { 0 };
    enum firn_status status;

    firn_progress_start(&l->progress, "comparing", firn_reader_layout_of(opening->reader)->content_bytes,
                        l->args->quiet || l->args->json);
    status = firn_manifest_check(opening->reader, &checking, &fault, &report);
    firn_progress_wipe(&l->progress);
    if (status != FIRN_OK)
        return firn_trouble_tell(l->view, fault.what[0] != '\0' ? NULL : l->container, status, &fault);
    show_check(l, &report);
    if (report.items > 0 && report.alike == 0)
        firn_view_note(l->view, "nothing-alike", l->args->values[CHECK],
                       "has nothing in common with the container; it stands for the folder that 'restore -C' would "
                       "fill, or for what --below names");
    if (report.findings[FIRN_MANIFEST_UNTOLD] > 0)
        exit = FIRN_EXIT_LOST;
    exit = tell_unknown(l, report.items_unknown, exit);
    if (exit == FIRN_EXIT_LOST)
        return exit;
    if (report.findings[FIRN_MANIFEST_UNREADABLE] > 0)
        return FIRN_EXIT_IO;
    return report.alike < report.items || report.findings[FIRN_MANIFEST_EXTRA] > 0 ? FIRN_EXIT_BAD_DATA : exit;
}

/* ---- the command ---- */

static int go(struct listing *l)
{
    struct firn_opening opening;
    size_t words = l->args->operand_count - 1;
    enum firn_status status = FIRN_OK;
    int exit = firn_opening_make(&opening, l->container, l->args, l->view);

    if (exit != FIRN_EXIT_SOUND)
        return exit;
    exit = firn_opening_remark(l->view, l->container, firn_reader_layout_of(opening.reader));
    if (words > 0)
        status = firn_pattern_make(l->args->operands + 1, words, firn_memory_system(), &l->choice.patterns);
    if (status != FIRN_OK)
        exit = firn_trouble_tell(l->view, l->container, status, NULL);
    else
        exit = l->args->values[CHECK] != NULL ? check(l, &opening, exit) : list(l, &opening, exit);
    for (size_t i = 0; status == FIRN_OK && i < words; i++)
        if (!firn_pattern_used(l->choice.patterns, i)) {
            firn_view_finding(l->view, "no-match", l->args->operands[i + 1], "chooses nothing in this container");
            exit = exit < FIRN_EXIT_LOST ? FIRN_EXIT_NO_INPUT : exit;
        }
    firn_pattern_free(l->choice.patterns);
    return firn_opening_leave(&opening, exit);
}

static int run(const struct firn_args *args, struct firn_view *view)
{
    struct listing l = { .args = args, .view = view, .algorithm = FIRN_MANIFEST_SHA256 };
    int exit;

    if (args->operand_count == 0)
        return firn_trouble_usage(view, "FILE", "is missing: name the container");
    l.container = args->operands[0];
    l.choice.below = args->values[BELOW];
    exit = read_algorithm(&l);
    return exit == FIRN_EXIT_SOUND ? go(&l) : exit;
}

const struct firn_command firn_command_manifest = {
    .name = "manifest",
    .summary = "digests of the files, as BagIt lines; compare a folder",
    .usage = "FILE [options] [PATTERN...]\n       firn manifest FILE --check DIR [options] [PATTERN...]",
    .about = "A line for each regular file, hard links included: digest, two blanks, path, as in\n"
             "the manifests of a BagIt bag (RFC 8493). SHA-256 stands in the catalogue; for SHA-512\n"
             "and MD5 all content is decoded, and only what its SHA-256 vouches for gets a line.\n\n"
             "With --check a folder is compared with the container, and what is missing, extra or\n"
             "changed is named: types, sizes, SHA-256, link targets; not owners, modes and times.\n"
             "Without --below, DIR stands for the folder that 'restore -C DIR' would fill.\n\n"
             "Exit status: 0 done, or alike; 65 they differ; 2 digests are lost.\n",
    .example = "  firn manifest quay-1931.firn --below srv/intake/quay >manifest-sha256.txt\n"
               "  firn manifest quay-1931.firn --below srv/intake/quay --check /srv/intake/quay\n",
    .options = options, .option_count = sizeof options / sizeof options[0], .run = run
};
