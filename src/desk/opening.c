/* desk/opening.c - a container named on the command line, opened for reading */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "desk/opening.h"

#include "desk/interrupt.h"
#include "desk/opening_store.h"
#include "desk/progress.h"
#include "desk/trouble.h"

#include <inttypes.h>

static struct firn_store *top(struct firn_opening *opening)
{
    return &opening->stores[opening->store_count - 1];
}

/* Opens the reader on the last store, with a patient one in front of it if that is asked for. */
static enum firn_status open_reader(struct firn_opening *opening, const struct firn_reader_options *like,
                                    struct firn_fault *fault)
{
    struct firn_reader_options options = *like;
    enum firn_status status = FIRN_OK;

    if (opening->readings > 0) {
        status = firn_store_patient(top(opening), opening->readings, options.memory,
                                    &opening->stores[opening->store_count]);
        opening->store_count += status == FIRN_OK;
    }
    options.store = top(opening);
    return status == FIRN_OK ? firn_reader_open(&options, fault, &opening->reader) : status;
}

/* Back to the store at the bottom. */
static void close_reader(struct firn_opening *opening, unsigned stores_left)
{
    firn_reader_free(opening->reader);
    opening->reader = NULL;
    while (opening->store_count > stores_left) {
        top(opening)->close(top(opening)->self);
        opening->store_count--;
    }
}

/*
 * Whether what was found may be the plain look of a container that bytes were lost from or put into: then its last
 * record is not where it should be. A device, longer than what was written to it, is not looked through for nothing.
 */
static bool odd(const struct firn_reader_layout *layout)
{
    return !layout->end_known || !layout->colophon_found || layout->blocks_missing > 0;
}

static void tell_stretches(struct firn_view *view, const char *path, uint64_t stretches)
{
    char words[300], count[FIRN_TEXT_COUNT_ROOM];
    struct firn_text text;

    firn_text_start(&text, words, sizeof words);
    if (stretches == 1)
        firn_text_add(&text, "its blocks are not where they belong: its head is missing or was put behind something");
    else
        firn_text_add(&text, "its blocks are not where they belong: bytes were lost or put in, it is in %s pieces",
                      firn_text_count(stretches, count));
    firn_text_add(&text, "; read from where they are, places told below are those they should have; collate makes "
                         "a sound copy");
    firn_view_finding(view, "misplaced", path, words);
}

static void step(void *self, uint64_t at, uint64_t bytes)
{
    struct firn_progress *progress = self;

    progress->goal_bytes = bytes;
    firn_progress_step(progress, 0, at);
}

/*
 * Tries to find the blocks of a container that cannot be read as it lies there. FIRN_OK when it can be read now;
 * FIRN_END when that does not help.
 */
static enum firn_status realign(struct firn_opening *opening, const struct firn_reader_options *options,
                                struct firn_view *view, const char *path, struct firn_fault *fault)
{
    struct firn_progress progress;
    struct firn_store_watch watch = { .self = &progress, .progress = step, .stop = firn_interrupt_asked };
    struct firn_store *store = &opening->stores[1];
    enum firn_status status;

    close_reader(opening, 1);
    firn_progress_start(&progress, "looking for blocks", 0, view->quiet || view->json);
    status = firn_store_realign(&opening->stores[0], &watch, options->memory, store, &opening->stretches, fault);
    firn_progress_wipe(&progress);
    if (status != FIRN_OK)
        return status;
    opening->store_count = 2;
    status = open_reader(opening, options, fault);
    if (status == FIRN_OK)
        tell_stretches(view, path, opening->stretches);
    return status;
}

int firn_opening_make_patient(struct firn_opening *opening, const char *path, unsigned readings,
                              const struct firn_args *args, struct firn_view *view)
{
    struct firn_reader_options options = {
        .memory = firn_memory_system(), .threads = args->threads, .stop = firn_interrupt_asked
    };
    struct firn_fault fault = { 0 };
    enum firn_status status;

    *opening = (struct firn_opening){ .readings = readings };
    status = firn_opening_store(view, path, options.memory, &opening->stores[0], &fault);
    opening->store_count = status == FIRN_OK;
    if (status == FIRN_OK)
        status = open_reader(opening, &options, &fault);
    if (status == FIRN_NOT_CONTAINER || (status == FIRN_OK && odd(firn_reader_layout_of(opening->reader)))) {
        enum firn_status before = status;

        status = realign(opening, &options, view, path, &fault);
        if (status == FIRN_END)      /* as it was, then */
            status = before == FIRN_OK ? open_reader(opening, &options, &fault) : before;
    }
    if (status == FIRN_OK)
        return FIRN_EXIT_SOUND;
    firn_opening_close(opening);
    return firn_trouble_tell(view, path, status, &fault);
}

int firn_opening_make(struct firn_opening *opening, const char *path, const struct firn_args *args,
                      struct firn_view *view)
{
    return firn_opening_make_patient(opening, path, 0, args, view);
}

void firn_opening_close(struct firn_opening *opening)
{
    close_reader(opening, 0);
    *opening = (struct firn_opening){ .reader = NULL };
}

int firn_opening_leave(struct firn_opening *opening, int exit)
{
    struct firn_reader_damage damage;

    firn_reader_damage_so_far(opening->reader, &damage);
    firn_opening_close(opening);
    return exit == FIRN_EXIT_SOUND && damage.mended + damage.rebuilt > 0 ? FIRN_EXIT_SAFE : exit;
}

uint64_t firn_opening_gained(const struct firn_opening *opening)
{
    return opening->store_count == 0 ? 0 : firn_store_patient_gained(&opening->stores[opening->store_count - 1]);
}

void firn_opening_show_layout(struct firn_view *view, const struct firn_reader_layout *layout)
{
    const struct firn_sheet_geometry *g = &layout->geometry;
    char words[200], run[FIRN_TEXT_SIZE_ROOM], count[FIRN_TEXT_COUNT_ROOM];
    struct firn_text text;

    firn_view_hex(view, "id", "identity", layout->id, sizeof layout->id);
    firn_view_bytes(view, "file-bytes", "size", layout->file_bytes);
    firn_text_start(&text, words, sizeof words);
    firn_text_add(&text, "%s of 4096 bytes", firn_text_count(layout->blocks, count));
    firn_text_add(&text, " in %s sheet%s", firn_text_count(layout->sheets, count), layout->sheets == 1 ? "" : "s");
    if (view->json) {
        firn_view_count(view, "blocks", NULL, layout->blocks);
        firn_view_count(view, "data-blocks", NULL, layout->data_blocks);
        firn_view_count(view, "sheets", NULL, layout->sheets);
        firn_view_count(view, "k", NULL, g->k);
        firn_view_count(view, "m", NULL, g->m);
        firn_view_count(view, "depth", NULL, g->depth);
        firn_view_switch(view, "end-known", layout->end_known);
        firn_view_switch(view, "title-page-sound", layout->title_sound);
        return;
    }
    firn_view_words(view, "", "blocks", words);
    firn_text_start(&text, words, sizeof words);
    if (g->m == 0)
        firn_text_add(&text, "NONE: a lost block cannot be rebuilt");
    else if (layout->sheets > 1)
        firn_text_add(&text, "any %u of the %u blocks of a row; any run of %s", (unsigned)g->m, (unsigned)g->k + g->m,
                      firn_text_size((uint64_t)g->m * g->depth * 4096, run));
    else
        firn_text_add(&text, "any %u of the %u blocks of a row; any run of %s", layout->last_sheet.m,
                      layout->last_sheet.k + layout->last_sheet.m,
                      firn_text_size((uint64_t)layout->last_sheet.reserve_blocks * 4096, run));
    firn_view_words(view, "", "can be lost", words);
    firn_view_words(view, "", "stray bits", "64 lanes a block, one flipped bit each is mended");
}

int firn_opening_remark(struct firn_view *view, const char *path, const struct firn_reader_layout *layout)
{
    char words[200], count[FIRN_TEXT_COUNT_ROOM];
    struct firn_text text;
    int worst = FIRN_EXIT_SOUND;

    firn_text_start(&text, words, sizeof words);
    if (!layout->end_known) {
        firn_view_finding(view, "cut-short", path, "its end is missing, and nobody knows how much that was; "
                                                   "take another copy");
        worst = FIRN_EXIT_LOST;
    } else if (layout->blocks_missing > 0) {
        firn_text_add(&text, "cut short: the last %s blocks are missing; scrub puts back what the reserve still holds",
                      firn_text_count(layout->blocks_missing, count));
        firn_view_finding(view, "cut-short", path, words);
        worst = FIRN_EXIT_SAFE;
    }
    if (layout->end_known && !layout->colophon_found) {
        firn_view_finding(view, "no-colophon", path,
                          "its last record is lost, so there may have been more items than can be "
                          "seen; take another copy");
        worst = FIRN_EXIT_LOST;
    }
    if (layout->foreign_bytes > 0 && layout->blocks_missing == 0) {
        firn_text_start(&text, words, sizeof words);
        firn_text_add(&text, "%" PRIu64 " bytes behind its end are not part of it; left alone", layout->foreign_bytes);
        firn_view_finding(view, "foreign-bytes", path, words);
    }
    if (!layout->title_sound) {
        firn_view_finding(view, "title-page", path, "the title page is not as its protected copy has it, or that is "
                                                    "lost; scrub heals it if it can");
        worst = worst == FIRN_EXIT_SOUND ? FIRN_EXIT_SAFE : worst;
    }
    return worst;
}

int firn_opening_look(struct firn_view *view, const char *path, const struct firn_opening *opening)
{
    struct firn_reader_layout layout = *firn_reader_layout_of(opening->reader);
    int exit;

    layout.title_sound = layout.title_sound || opening->stretches > 0;
    exit = firn_opening_remark(view, path, &layout);
    return exit == FIRN_EXIT_SOUND && opening->stretches > 0 ? FIRN_EXIT_SAFE : exit;
}
