/* desk/loss.c - the account of loss: which bytes of which item are gone, and why */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "desk/loss.h"

#include <errno.h>
#include <inttypes.h>
#include <unistd.h>

static const char *word_for(enum firn_reader_loss why)
{
    switch (why) {
    case FIRN_READER_LOSS_BLOCKS:    return "blocks";
    case FIRN_READER_LOSS_WITHDRAWN: return "withdrawn";
    case FIRN_READER_LOSS_CONTENT:   return "content";
    }
    return "unknown";
}

void firn_loss_ranges(struct firn_view *view, const struct firn_outlet_finding *finding)
{
    FILE *out = view->out;

    fprintf(out, ",\"bytes\":%" PRIu64 ",\"lost-bytes\":%" PRIu64 ",\"ranges\":[", finding->bytes, finding->lost_bytes);
    for (uint64_t i = 0; i < finding->range_count; i++) {
        const struct firn_outlet_range *range = &finding->ranges[i];

        fprintf(out, "%s{\"at\":%" PRIu64 ",\"bytes\":%" PRIu64 ",\"why\":\"%s\",\"container-at\":%" PRIu64,
                i > 0 ? "," : "", range->at, range->bytes, word_for(range->why), range->container_at);
        if (range->lost_blocks > 0)
            fprintf(out, ",\"first-block\":%" PRIu64 ",\"last-block\":%" PRIu64 ",\"lost-blocks\":%" PRIu64,
                    range->first_block, range->last_block, range->lost_blocks);
        fputc('}', out);
    }
    fputc(']', out);
}

enum firn_status firn_loss_open(struct firn_loss *loss, const char *path, const char *container,
                                const struct firn_outlet_options *outlet, bool json, struct firn_fault *fault)
{
    enum firn_status status;
    int descriptor;
    char words[1024];
    struct firn_text text;

    *loss = (struct firn_loss){ .path = path };
    if (path == NULL)
        return FIRN_OK;
    status = firn_store_stage_open(path, outlet->replace, outlet->memory, &loss->stage, fault);
    if (status != FIRN_OK)
        return status;
    firn_view_make(&loss->view, "restore", json, false);
    descriptor = dup(firn_store_stage_descriptor(loss->stage));
    loss->view.out = descriptor < 0 ? NULL : fdopen(descriptor, "w");
    if (loss->view.out == NULL) {
        fault->os_error = errno;
        if (descriptor >= 0)
            close(descriptor);
        firn_loss_close(loss);
        return FIRN_CANNOT_CREATE;
    }
    firn_text_start(&text, words, sizeof words);
    firn_text_add(&text, "what is lost of the items in %s", container);
    firn_view_begin(&loss->view, "loss-account", words);
    firn_view_words(&loss->view, "container", NULL, container);
    firn_view_end(&loss->view);
    return FIRN_OK;
}

static void add_why(struct firn_text *text, const struct firn_outlet_range *range)
{
    switch (range->why) {
    case FIRN_READER_LOSS_WITHDRAWN:
        firn_text_add(text, "never written: could not be read when this was packed");
        return;
    case FIRN_READER_LOSS_CONTENT:
        firn_text_add(text, "the blocks are there, but what they hold does not satisfy its hash");
        return;
    case FIRN_READER_LOSS_BLOCKS:
        break;
    }
    if (range->lost_blocks == 0)
        firn_text_add(text, "lost with the part of the catalogue that tells where they are");
    else if (range->lost_blocks == 1)
        firn_text_add(text, "block %" PRIu64 " is lost, at byte %" PRIu64 " of the container", range->first_block,
                      range->container_at);
    else
        firn_text_add(text, "%" PRIu64 " of the blocks %" PRIu64 "-%" PRIu64 " are lost, from byte %" PRIu64
                      " of the container", range->lost_blocks, range->first_block, range->last_block,
                      range->container_at);
}

static void add_words(struct firn_loss *loss, const struct firn_outlet_finding *finding)
{
    char words[512], count[FIRN_TEXT_COUNT_ROOM];
    struct firn_text text;

    firn_text_start(&text, words, sizeof words);
    if (finding->kind == FIRN_OUTLET_LOST) {
        firn_text_add(&text, "%s of ", firn_text_count(finding->lost_bytes, count));
        firn_text_add(&text, "%s bytes are lost", firn_text_count(finding->bytes, count));
        firn_text_add(&text, finding->kept ? "; kept, with zeros in their place" : "; not written");
    } else {
        firn_text_add(&text, finding->kind == FIRN_OUTLET_LINK
                                 ? "a hard link to an item that is not whole"
                                 : "all blocks are there, but its bytes do not have the SHA-256 of the catalogue");
        firn_text_add(&text, finding->kept ? "; given back all the same" : "; not written");
    }
    fputc('\n', loss->view.out);
    firn_view_line(&loss->view, finding->path, words);
    for (uint64_t i = 0; i < finding->range_count; i++) {
        const struct firn_outlet_range *range = &finding->ranges[i];

        firn_text_start(&text, words, sizeof words);
        add_why(&text, range);
        fprintf(loss->view.out, "  bytes %" PRIu64 "-%" PRIu64 ": %s\n", range->at, range->at + range->bytes - 1,
                words);
    }
}

void firn_loss_add(struct firn_loss *loss, const struct firn_outlet_finding *finding)
{
    static const char *const kinds[FIRN_OUTLET_KINDS] = {
        [FIRN_OUTLET_LOST] = "lost", [FIRN_OUTLET_MISMATCH] = "mismatch", [FIRN_OUTLET_LINK] = "link"
    };
    struct firn_view *view = &loss->view;

    if (loss->stage == NULL || kinds[finding->kind] == NULL)
        return;
    loss->items++;
    if (!view->json) {
        add_words(loss, finding);
        return;
    }
    firn_view_begin(view, "loss", NULL);
    firn_view_words(view, "kind", NULL, kinds[finding->kind]);
    firn_view_words(view, "path", NULL, finding->path);
    firn_view_count(view, "item", NULL, finding->number);
    firn_view_switch(view, "kept", finding->kept);
    firn_loss_ranges(view, finding);
    firn_view_end(view);
}

enum firn_status firn_loss_keep(struct firn_loss *loss, const struct firn_outlet_report *report,
                                struct firn_fault *fault)
{
    struct firn_view *view = &loss->view;
    char heading[300], count[FIRN_TEXT_COUNT_ROOM];
    struct firn_text text;
    FILE *out = view->out;

    if (loss->stage == NULL)
        return FIRN_OK;
    firn_text_start(&text, heading, sizeof heading);
    if (loss->items == 0) {
        firn_text_add(&text, "nothing is lost");
    } else {
        firn_text_add(&text, "%s item%s not whole, ", firn_text_count(loss->items, count),
                      loss->items == 1 ? " is" : "s are");
        firn_text_add(&text, "%s bytes are lost", firn_text_count(report->lost_bytes, count));
    }
    if (report->items_unknown > 0)
        firn_text_add(&text, "; of %s more items not even the names are known",
                      firn_text_count(report->items_unknown, count));
    if (report->cut_short)
        firn_text_add(&text, "; the end of the container is gone, so there may have been more");
    if (!view->json)
        fputc('\n', out);
    firn_view_begin(view, "loss-sum", heading);
    firn_view_count(view, "items", NULL, loss->items);
    firn_view_count(view, "lost-bytes", NULL, report->lost_bytes);
    firn_view_count(view, "unknown-items", NULL, report->items_unknown);
    firn_view_switch(view, "cut-short", report->cut_short);
    firn_view_end(view);
    view->out = NULL;
    if (fclose(out) != 0) {
        fault->os_error = errno;
        return FIRN_IO;
    }
    return firn_store_stage_keep(loss->stage, fault);
}

void firn_loss_close(struct firn_loss *loss)
{
    if (loss->view.out != NULL && loss->stage != NULL)
        (void)fclose(loss->view.out);
    firn_store_stage_close(loss->stage);
    *loss = (struct firn_loss){ .stage = NULL };
}
