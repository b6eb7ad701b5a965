/* desk/opening.c - a container named on the command line, opened for reading */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "desk/opening.h"

#include "desk/interrupt.h"
#include "desk/trouble.h"

#include <inttypes.h>
#include <string.h>
#include <unistd.h>

int firn_opening_make(struct firn_opening *opening, const char *path, const struct firn_args *args,
                      struct firn_view *view)
{
    struct firn_reader_options options = {
        .store = &opening->store, .memory = firn_memory_system(), .threads = args->threads, .stop = firn_interrupt_asked
    };
    struct firn_fault fault = { 0 };
    enum firn_status status;

    *opening = (struct firn_opening){ .reader = NULL };
    if (strcmp(path, "-") == 0)
        status = firn_store_spool(STDIN_FILENO, options.memory, &opening->store, &fault);
    else
        status = firn_store_open(path, FIRN_STORE_READ, options.memory, &opening->store, &fault);
    opening->store_open = status == FIRN_OK;
    if (status == FIRN_OK)
        status = firn_reader_open(&options, &fault, &opening->reader);
    if (status == FIRN_OK)
        return FIRN_EXIT_SOUND;
    firn_opening_close(opening);
    return firn_trouble_tell(view, path, status, &fault);
}

void firn_opening_close(struct firn_opening *opening)
{
    firn_reader_free(opening->reader);
    if (opening->store_open)
        opening->store.close(opening->store.self);
    *opening = (struct firn_opening){ .reader = NULL };
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
