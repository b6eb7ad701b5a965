/* desk/scrub_metrics.c - a scrub for monitoring */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "desk/scrub_metrics.h"

#include "desk/staged.h"

#include <inttypes.h>
#include <time.h>

enum { WORDS_ROOM = 32768 };

struct writing {
    const struct firn_scrub_turn *turns;
    size_t count;
    int exit;
};

/* Of a container in its newest scrub, whether in this run or an earlier one. False: nothing is known of it. */
typedef bool (measure)(const struct firn_scrub_turn *turn, const struct firn_history_entry *newest, double *value);

static bool is_scrubbed_at(const struct firn_scrub_turn *turn, const struct firn_history_entry *newest, double *value)
{
    (void)newest;
    *value = (double)firn_history_last_done(turn->history);
    return *value > 0;
}

static bool is_checked(const struct firn_scrub_turn *turn, const struct firn_history_entry *newest, double *value)
{
    (void)turn;
    *value = (double)newest->reached / (double)newest->blocks;
    return true;
}

static bool is_failed(const struct firn_scrub_turn *turn, const struct firn_history_entry *newest, double *value)
{
    (void)newest;
    *value = turn->status != FIRN_OK;
    return turn->tried;
}

static bool is_growing(const struct firn_scrub_turn *turn, const struct firn_history_entry *newest, double *value)
{
    (void)newest;
    *value = firn_history_trend(turn->history).grows;
    return true;
}

static bool is_cut(const struct firn_scrub_turn *turn, const struct firn_history_entry *newest, double *value)
{
    (void)turn;
    *value = newest->end_missing;
    return true;
}

#define FIELD(name) offsetof(struct firn_history_entry, name)

static const struct gauge {
    const char *name, *help;
    measure *of;           /* or NULL: */
    size_t field;          /* a number of the newest scrub */
    bool always;           /* also of a container that nothing is known of */
} gauges[] = {
    { "firn_container_blocks", "Blocks of 4096 bytes that the container has.", NULL, FIELD(blocks), false },
    { "firn_container_scrubbed_timestamp_seconds", "When it was gone through last.", is_scrubbed_at, 0, false },
    { "firn_container_checked_ratio", "How far the newest scrub has come.", is_checked, 0, false },
    { "firn_container_mended_blocks", "Blocks with stray bits in the newest scrub.", NULL, FIELD(mended), false },
    { "firn_container_rebuilt_blocks", "Blocks from the reserve in the newest scrub.", NULL, FIELD(rebuilt), false },
    { "firn_container_lost_blocks", "Blocks that are lost, in the newest scrub.", NULL, FIELD(lost), false },
    { "firn_container_unreadable_blocks", "Blocks that the medium gave an error for.", NULL, FIELD(unreadable), false },
    { "firn_container_damaged_places", "Runs of damaged blocks in the newest scrub.", NULL, FIELD(places), false },
    { "firn_container_cut_short", "1 when its end is missing.", is_cut, 0, false },
    { "firn_container_damage_growing", "1 when damage comes faster: copy this medium.", is_growing, 0, false },
    { "firn_container_scrub_failed", "1 when this run could not look at it.", is_failed, 0, true },
};

/* In a label backslash, quote and line feed are escaped; bytes that are no UTF-8 must not be there at all. */
static void put_label(FILE *out, const char *words)
{
    char name[WORDS_ROOM];
    struct firn_text text;

    firn_text_start(&text, name, sizeof name);
    firn_text_add_name(&text, words);      /* control characters and foreign bytes are visible from here on */
    for (const char *at = name; *at != '\0'; at++) {
        if (*at == '\\' || *at == '"')
            fputc('\\', out);
        fputc(*at, out);
    }
}

static void put_head(FILE *out, const char *name, const char *help)
{
    fprintf(out, "# TYPE %s gauge\n# HELP %s %s\n", name, name, help);
}

static bool take(const struct gauge *gauge, const struct firn_scrub_turn *turn, const struct firn_history_entry *newest,
                 double *value)
{
    if (gauge->of != NULL)
        return gauge->of(turn, newest, value);
    *value = (double)*(const uint64_t *)(const void *)((const char *)newest + gauge->field);
    return true;
}

static void put_gauge(FILE *out, const struct writing *w, const struct gauge *gauge)
{
    put_head(out, gauge->name, gauge->help);
    for (size_t i = 0; i < w->count; i++) {
        const struct firn_scrub_turn *turn = &w->turns[i];
        const struct firn_history *history = turn->history;
        const struct firn_history_entry *newest = NULL;
        double value;

        if (history != NULL && history->count > 0)
            newest = &history->entries[history->count - 1];
        if ((newest == NULL && !gauge->always) || !take(gauge, turn, newest, &value))
            continue;
        fprintf(out, "%s{container=\"", gauge->name);
        put_label(out, turn->path);
        fprintf(out, "\"} %.17g\n", value);
    }
}

static void put_run(FILE *out, const char *name, const char *help, double value)
{
    put_head(out, name, help);
    fprintf(out, "%s %.17g\n", name, value);
}

static void write_all(void *self, FILE *out)
{
    const struct writing *w = self;
    size_t waiting = 0;

    for (size_t i = 0; i < w->count; i++)
        waiting += w->turns[i].waits || (w->turns[i].tried && w->turns[i].entry.blocks > 0 && !w->turns[i].entry.done);
    put_run(out, "firn_scrub_run_timestamp_seconds", "When the newest run ended.", (double)time(NULL));
    put_run(out, "firn_scrub_run_exit_status", "0 sound, 1 damage, all safe, 2 bytes lost, else it failed.", w->exit);
    put_run(out, "firn_scrub_run_containers", "Containers that the run was told of.", (double)w->count);
    put_run(out, "firn_scrub_run_waiting_containers", "Of these, not gone through: they wait.", (double)waiting);
    for (size_t i = 0; i < sizeof gauges / sizeof gauges[0]; i++)
        put_gauge(out, w, &gauges[i]);
    fputs("# EOF\n", out);
}

enum firn_status firn_scrub_metrics(const char *path, const struct firn_scrub_turn *turns, size_t count, int exit,
                                    struct firn_fault *fault)
{
    struct writing w = { turns, count, exit };

    return firn_staged_write(path, write_all, &w, fault);
}
