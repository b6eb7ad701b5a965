/* desk/pack_bags.c - the bags among the operands of pack */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "desk/pack_bags.h"

#include <stdlib.h>

enum firn_status firn_pack_bags_open(struct firn_pack_bags *bags, const struct firn_args *args, struct firn_view *view,
                                     struct firn_fault *fault)
{
    enum firn_status status = FIRN_OK;

    *bags = (struct firn_pack_bags){ .view = view, .status = FIRN_OK };
    bags->list = calloc(args->operand_count + 1, sizeof *bags->list);
    if (bags->list == NULL)
        return FIRN_NO_MEMORY;
    for (; bags->count < args->operand_count && status == FIRN_OK; bags->count++) {
        struct firn_pack_bag *bag = &bags->list[bags->count];

        bag->operand = args->operands[bags->count];
        status = firn_bag_open(bag->operand, firn_memory_system(), fault, &bag->bag);
        if (bag->bag != NULL)
            bags->digests |= firn_bag_digests(bag->bag);
    }
    return status;
}

void firn_pack_bags_end(struct firn_pack_bags *bags)
{
    for (size_t i = 0; i < bags->count; i++)
        firn_bag_free(bags->list[i].bag);
    free(bags->list);
    bags->list = NULL;
    bags->count = 0;
}

void firn_pack_bags_see(struct firn_pack_bags *bags, const struct firn_intake_item *item)
{
    for (size_t i = 0; i < bags->count && bags->status == FIRN_OK; i++)
        if (bags->list[i].bag != NULL)
            bags->status = firn_bag_see(bags->list[i].bag, item);
}

static void tell(void *self, const struct firn_bag_finding *finding)
{
    static const struct { const char *kind, *words; } kinds[FIRN_BAG_KINDS] = {
        [FIRN_BAG_MISSING] = { "missing", "is listed in the bag, but was not taken in" },
        [FIRN_BAG_MISMATCH] = { "mismatch", "is not what the bag's manifest says it should be" },
        [FIRN_BAG_UNLISTED] = { "unlisted", "is payload that the bag's manifest does not list" },
        [FIRN_BAG_UNPROVED] = { "unproved", "is a hard link to something outside the bag, so it cannot be checked" },
        [FIRN_BAG_OXUM] = { "payload-oxum", "Payload-Oxum does not agree" },
    };
    struct firn_pack_bags *bags = self;
    char words[300], path[2 * FIRN_INTAKE_NAME_MAX];
    struct firn_text text;

    firn_text_start(&text, path, sizeof path);
    firn_text_add(&text, "%s/%s", bags->at->operand, finding->path);
    firn_text_start(&text, words, sizeof words);
    firn_text_add(&text, "%s", kinds[finding->kind].words);
    if (finding->detail[0] != '\0')
        firn_text_add(&text, ": %s", finding->detail);
    firn_view_finding(bags->view, kinds[finding->kind].kind, path, words);
    bags->troubles++;
}

void firn_pack_bags_judge(struct firn_pack_bags *bags)
{
    for (size_t i = 0; i < bags->count; i++)
        if (bags->list[i].bag != NULL) {
            bags->at = &bags->list[i];
            firn_bag_finish(bags->list[i].bag, tell, bags, &bags->list[i].report);
        }
}

/* "complete" and "valid" are RFC 8493's words. */
void firn_pack_bags_show(const struct firn_pack_bags *bags)
{
    for (size_t i = 0; i < bags->count; i++) {
        const struct firn_bag_report *report = &bags->list[i].report;
        char words[400], count[FIRN_TEXT_COUNT_ROOM];
        struct firn_text text;

        if (bags->list[i].bag == NULL)
            continue;
        firn_text_start(&text, words, sizeof words);
        firn_text_add(&text, "complete and valid by %s, %s payload files", report->algorithms,
                      firn_text_count(report->files, count));
        if (report->unknown[0] != '\0')
            firn_text_add(&text, "; not checked: %s", report->unknown);
        firn_view_words(bags->view, "bag", "bag", words);
    }
}
