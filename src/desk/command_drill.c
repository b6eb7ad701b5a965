/* desk/command_drill.c - the "drill" command: words in, one call to care, a line for each trial and a sum */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "desk/commands.h"

#include "desk/interrupt.h"
#include "desk/progress.h"
#include "desk/trouble.h"
#include "firn/drill.h"

#include <inttypes.h>
#include <stdlib.h>
#include <string.h>
#include <time.h>

enum option {
    FLIP_RATE, LOSE_RATE, RUN, GOOD_TO_BAD, BAD_TO_GOOD, RIGHT_IN_BAD, RIGHT_IN_GOOD, CUT, TRIALS, SEED, SCRATCH
};

static const struct firn_args_option options[] = {
    [FLIP_RATE] = { "flip-rate", '\0', "RATE", "flip every bit with this chance, each on its own" },
    [LOSE_RATE] = { "lose-rate", '\0', "RATE", "lose every block of 4096 bytes with this chance" },
    [RUN] = { "run", '\0', "SIZE", "lose SIZE in a row, somewhere; may be given often" },
    [GOOD_TO_BAD] = { "good-to-bad", '\0', "RATE", "chance of each bit to begin a burst" },
    [BAD_TO_GOOD] = { "bad-to-good", '\0', "RATE", "chance of each bit to end it: bursts last 1/RATE bits on average" },
    [RIGHT_IN_BAD] = { "right-in-bad", '\0', "RATE", "chance of a bit inside a burst to be right (default 0.5)" },
    [RIGHT_IN_GOOD] = { "right-in-good", '\0', "RATE", "chance of a bit outside of bursts to be right (default 1)" },
    [CUT] = { "cut", '\0', "SIZE", "take SIZE off the end" },
    [TRIALS] = { "trials", '\0', "N", "so many trials, each with damage of its own (default 1)" },
    [SEED] = { "seed", '\0', "N", "the same number does the same damage (default: from the clock)" },
    [SCRATCH] = { "scratch", '\0', "DIR", "where the copy goes (default: TMPDIR, else /tmp)" },
};

/* What happens when no damage is asked for: noise, and one block in a hundred gone. */
static const double default_flip_rate = 1e-6, default_lose_rate = 0.01;

struct drilling {
    const struct firn_args *args;
    struct firn_view *view;
    struct firn_progress progress;
    struct firn_drill_options drill;
};

static bool read_rate(const struct firn_args *args, enum option option, double *rate)
{
    const char *words = args->values[option];
    char *end;

    if (words == NULL)
        return true;
    *rate = strtod(words, &end);
    return end != words && *end == '\0' && *rate >= 0 && *rate <= 1;
}

static int read_rates(struct drilling *d)
{
    struct firn_drill_damage *damage = &d->drill.damage;
    double right_in_good = 1, right_in_bad = 0.5;
    const struct { enum option option; double *rate; } rates[] = {
        { FLIP_RATE, &damage->flip_rate }, { LOSE_RATE, &damage->lose_rate }, { GOOD_TO_BAD, &damage->good_to_bad },
        { BAD_TO_GOOD, &damage->bad_to_good }, { RIGHT_IN_BAD, &right_in_bad }, { RIGHT_IN_GOOD, &right_in_good },
    };

    for (size_t i = 0; i < sizeof rates / sizeof rates[0]; i++)
        if (!read_rate(d->args, rates[i].option, rates[i].rate))
            return firn_trouble_usage(d->view, d->args->values[rates[i].option], "is no chance from 0 to 1");
    damage->wrong_in_good = 1 - right_in_good;
    damage->wrong_in_bad = 1 - right_in_bad;
    if (d->args->given[GOOD_TO_BAD] != d->args->given[BAD_TO_GOOD])
        return firn_trouble_usage(d->view, "--good-to-bad", "and --bad-to-good go together");
    if (!d->args->given[GOOD_TO_BAD] && (d->args->given[RIGHT_IN_BAD] || d->args->given[RIGHT_IN_GOOD]))
        return firn_trouble_usage(d->view, "--right-in-bad", "and --right-in-good want --good-to-bad as well");
    return FIRN_EXIT_SOUND;
}

static int read_sizes(struct drilling *d)
{
    struct firn_drill_damage *damage = &d->drill.damage;
    const char *cut = d->args->values[CUT];

    for (size_t i = 0; i < d->args->all_count; i++) {
        if (d->args->all_options[i] != RUN)
            continue;
        if (damage->run_count == FIRN_DRILL_RUNS_MAX)
            return firn_trouble_usage(d->view, d->args->all_values[i], "is one run too many: 16 are allowed");
        if (firn_text_parse_size(d->args->all_values[i], &damage->runs[damage->run_count++]) != FIRN_OK)
            return firn_trouble_usage(d->view, d->args->all_values[i], "is no size such as 16MiB");
    }
    if (cut != NULL && firn_text_parse_size(cut, &damage->cut_bytes) != FIRN_OK)
        return firn_trouble_usage(d->view, cut, "is no size such as 16MiB");
    return FIRN_EXIT_SOUND;
}

static int read_words(struct drilling *d)
{
    const char *trials = d->args->values[TRIALS], *seed = d->args->values[SEED];
    const bool *given = d->args->given;
    int exit = read_rates(d);

    if (exit == FIRN_EXIT_SOUND)
        exit = read_sizes(d);
    if (exit != FIRN_EXIT_SOUND)
        return exit;
    if (d->args->operand_count == 0)
        return firn_trouble_usage(d->view, "FILE", "is missing: name the container");
    if (d->args->operand_count > 1)
        return firn_trouble_usage(d->view, d->args->operands[1], "is one container too many: name one");
    if (trials != NULL && (firn_text_parse_count(trials, &d->drill.trials) != FIRN_OK || d->drill.trials == 0))
        return firn_trouble_usage(d->view, trials, "is no number of trials");
    if (seed != NULL && firn_text_parse_count(seed, &d->drill.seed) != FIRN_OK)
        return firn_trouble_usage(d->view, seed, "is no whole number");
    if (!given[FLIP_RATE] && !given[LOSE_RATE] && !given[RUN] && !given[GOOD_TO_BAD] && !given[CUT]) {
        d->drill.damage.flip_rate = default_flip_rate;
        d->drill.damage.lose_rate = default_lose_rate;
    }
    return FIRN_EXIT_SOUND;
}

static void step(void *self, uint64_t done, uint64_t bytes)
{
    struct drilling *d = self;

    d->progress.goal_bytes = bytes;
    firn_progress_step(&d->progress, 0, done);
}

static void add_part(struct firn_text *text, const char *before, uint64_t count, const char *one, const char *many)
{
    char words[FIRN_TEXT_COUNT_ROOM];

    if (count > 0)
        firn_text_add(text, "%s%s %s", before, firn_text_count(count, words), count == 1 ? one : many);
}

static void add_spoiled(struct firn_text *text, const struct firn_drill_spoiled *spoiled)
{
    const struct { uint64_t count; const char *one, *many; } parts[] = {
        { spoiled->flipped_bits, "bit flipped", "bits flipped" },
        { spoiled->burst_bits, "bit flipped around bursts", "bits flipped around bursts" },
        { spoiled->lost_blocks, "block overwritten", "blocks overwritten" },
        { spoiled->run_bytes, "byte overwritten in runs", "bytes overwritten in runs" },
        { spoiled->cut_bytes, "byte cut off", "bytes cut off" },
    };
    size_t before = text->used;

    for (size_t i = 0; i < sizeof parts / sizeof parts[0]; i++)
        add_part(text, text->used > before ? ", " : "", parts[i].count, parts[i].one, parts[i].many);
    if (text->used == before)
        firn_text_add(text, "nothing happened to it");
}

/* What came of the copy: who repaired it, then what is gone. */
static void add_outcome(struct firn_text *text, const struct firn_drill_trial *trial)
{
    char count[FIRN_TEXT_COUNT_ROOM];
    size_t before;

    if (!trial->recognised) {
        firn_text_add(text, "LOST: nothing is left by which to know it as a container");
        return;
    }
    firn_text_add(text, trial->whole ? "whole: " : "NOT whole: ");
    before = text->used;
    add_part(text, "", trial->blocks_mended, "block mended by its lanes", "blocks mended by their lanes");
    add_part(text, text->used > before ? ", " : "", trial->blocks_rebuilt, "block rebuilt from the reserve",
             "blocks rebuilt from the reserve");
    add_part(text, text->used > before ? ", " : "", trial->blocks_lost, "block LOST", "blocks LOST");
    if (text->used == before)
        firn_text_add(text, trial->whole ? "nothing to repair" : "its title page is lost");
    if (trial->items_whole < trial->items) {
        add_part(text, "; ", trial->items - trial->items_whole, "item not whole", "items not whole");
        if (trial->content_bytes_lost > 0)
            firn_text_add(text, ", %s bytes lost", firn_text_count(trial->content_bytes_lost, count));
    }
    if (trial->blocks_wrong > 0)
        add_part(text, "; WRONGLY passed as good: ", trial->blocks_wrong, "block; please report this",
                 "blocks; please report this");
}

static void show_trial_json(struct firn_view *view, const struct firn_drill_trial *trial)
{
    const struct firn_drill_spoiled *spoiled = &trial->spoiled;

    firn_view_begin(view, "drill-trial", NULL);
    firn_view_count(view, "trial", NULL, trial->number);
    firn_view_count(view, "flipped-bits", NULL, spoiled->flipped_bits);
    firn_view_count(view, "bursts", NULL, spoiled->bursts);
    firn_view_count(view, "bad-bits", NULL, spoiled->bad_bits);
    firn_view_count(view, "burst-flipped-bits", NULL, spoiled->burst_bits);
    firn_view_count(view, "overwritten-blocks", NULL, spoiled->lost_blocks);
    firn_view_count(view, "run-bytes", NULL, spoiled->run_bytes);
    firn_view_count(view, "cut-bytes", NULL, spoiled->cut_bytes);
    firn_view_switch(view, "recognised", trial->recognised);
    firn_view_switch(view, "whole", trial->whole);
    firn_view_count(view, "blocks-mended", NULL, trial->blocks_mended);
    firn_view_count(view, "blocks-rebuilt", NULL, trial->blocks_rebuilt);
    firn_view_count(view, "blocks-lost", NULL, trial->blocks_lost);
    firn_view_count(view, "blocks-wrong", NULL, trial->blocks_wrong);
    firn_view_count(view, "items", NULL, trial->items);
    firn_view_count(view, "items-whole", NULL, trial->items_whole);
    firn_view_count(view, "lost-bytes", NULL, trial->content_bytes_lost);
    firn_view_end(view);
}

static void show_trial(void *self, const struct firn_drill_trial *trial)
{
    struct drilling *d = self;
    char words[1024], name[48], count[FIRN_TEXT_COUNT_ROOM];
    struct firn_text text;

    firn_progress_wipe(&d->progress);
    if (d->view->json) {
        show_trial_json(d->view, trial);
        return;
    }
    if (d->view->quiet && trial->whole)
        return;
    snprintf(name, sizeof name, "trial %s", firn_text_count(trial->number, count));
    firn_text_start(&text, words, sizeof words);
    add_spoiled(&text, &trial->spoiled);
    firn_text_add(&text, " -> ");
    add_outcome(&text, trial);
    firn_view_line(d->view, name, words);
}

static void show_sum(struct drilling *d, const struct firn_drill_report *report)
{
    char heading[300], trials[FIRN_TEXT_COUNT_ROOM], whole[FIRN_TEXT_COUNT_ROOM];
    struct firn_text text;

    firn_text_start(&text, heading, sizeof heading);
    firn_text_add(&text, "whole in %s of %s trial%s; --seed %" PRIu64 " does the same damage again",
                  firn_text_count(report->whole, whole), firn_text_count(report->trials, trials),
                  report->trials == 1 ? "" : "s", d->drill.seed);
    firn_view_begin(d->view, "drill", heading);
    firn_view_words(d->view, "container", NULL, d->drill.path);
    firn_view_words(d->view, "scratch", NULL, d->drill.scratch);
    firn_view_count(d->view, "seed", NULL, d->drill.seed);
    firn_view_bytes(d->view, "file-bytes", NULL, report->file_bytes);
    firn_view_count(d->view, "items", NULL, report->items);
    firn_view_count(d->view, "trials", NULL, report->trials);
    firn_view_count(d->view, "whole", NULL, report->whole);
    firn_view_count(d->view, "least-items-whole", NULL, report->least_items_whole);
    firn_view_end(d->view);
}

/* Where the copy is going to be: said before it is made, since it is as large as the container. */
static void tell_place(struct drilling *d)
{
    char words[512];
    const char *folder = getenv("TMPDIR");
    struct firn_text text;

    if (d->drill.scratch == NULL)
        d->drill.scratch = folder != NULL && folder[0] != '\0' ? folder : "/tmp";
    firn_text_start(&text, words, sizeof words);
    firn_text_add(&text, "rehearsing on a copy in %s; the original is only read", d->drill.scratch);
    if (!d->view->json)
        firn_view_note(d->view, "copy", d->drill.path, words);
}

static int run(const struct firn_args *args, struct firn_view *view)
{
    struct drilling d = { .args = args, .view = view };
    struct firn_drill_report report;
    struct firn_fault fault = { 0 };
    enum firn_status status;
    int exit;

    d.drill = (struct firn_drill_options){
        .scratch = args->values[SCRATCH], .memory = firn_memory_system(), .threads = args->threads,
        .seed = (uint64_t)time(NULL), .trials = 1, .self = &d, .stop = firn_interrupt_asked, .progress = step,
        .trial = show_trial
    };
    exit = read_words(&d);
    if (exit != FIRN_EXIT_SOUND)
        return exit;
    d.drill.path = args->operands[0];
    tell_place(&d);
    firn_progress_start(&d.progress, "drilling", 0, args->quiet || args->json);
    status = firn_drill(&d.drill, &report, &fault);
    firn_progress_wipe(&d.progress);
    if (report.trials > 0)
        show_sum(&d, &report);
    if (status == FIRN_BAD_ARGUMENT)
        return firn_trouble_usage(view, fault.what, "cannot be done to this container");
    if (status == FIRN_BAD_DATA) {
        firn_view_finding(view, "not-sound", d.drill.path, "is not sound itself; scrub it first, then rehearse");
        return FIRN_EXIT_BAD_DATA;
    }
    if (status != FIRN_OK)
        return firn_trouble_tell(view, d.drill.path, status, &fault);
    return report.whole < report.trials ? FIRN_EXIT_LOST : FIRN_EXIT_SOUND;
}

const struct firn_command firn_command_drill = {
    .name = "drill",
    .summary = "rehearse damage on a copy, report what came back",
    .usage = "FILE [--flip-rate RATE] [--lose-rate RATE] [--run SIZE]... [options]",
    .about = "Copies the container into a temporary file that nobody else sees, damages the copy as\n"
             "asked, reads every item back from it, repairs it as scrub would, and compares it with\n"
             "the original, which is only read. Says which layer repaired how much, and what would\n"
             "have been lost. The copy needs as much space as the container.\n\n"
             "Bursts follow the chain of Gilbert and Elliott, a step for each bit. Without any\n"
             "damage asked for: --flip-rate 1e-6 --lose-rate 0.01.\n\n"
             "A drill tells what the codes do about this damage, not which damage your medium will\n"
             "have: for that, ask forecast, your own scrub reports, and your institution's policy.\n\n"
             "Exit status: 0 it came back whole from every trial; 2 not from every one; 65 the\n"
             "container is damaged itself: scrub it first.\n",
    .example = "  firn drill quay-1931.firn --run 16MiB --flip-rate 1e-5 --trials 20 --seed 1931\n"
               "  firn drill quay-1931.firn --good-to-bad 1e-7 --bad-to-good 0.001 --scratch /srv/scratch\n",
    .options = options, .option_count = sizeof options / sizeof options[0], .run = run
};
