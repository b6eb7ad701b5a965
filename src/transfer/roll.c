/* transfer/roll.c - the roll of a container */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "transfer/roll.h"

#include "base/fault.h"
#include "firn/about.h"
#include "transfer/stored_name.h"

#include <string.h>

struct reading {
    struct firn_roll *roll;
    struct firn_about *about;
    struct firn_pattern *patterns;
    char below[FIRN_STORED_NAME_ROOM];
    size_t below_bytes;
};

static bool is_chosen(const struct reading *reading, const char *name)
{
    bool inside = reading->below_bytes == 0 || (strlen(name) > reading->below_bytes
                                                && firn_stored_name_within(name, reading->below, reading->below_bytes));

    return inside && (reading->patterns == NULL || firn_pattern_match(reading->patterns, name));
}

/* What a link leads to is entered when the link is met: its target is an earlier item, or nobody's. */
static enum firn_status enter_link(struct reading *reading, const struct firn_about_facts *facts,
                                   struct firn_roll_item *entry)
{
    size_t bytes = strlen(facts->link);

    if (facts->type == 'h') {
        entry->file = firn_names_find(reading->roll->items, facts->link, bytes);
        while (entry->file != NULL && entry->file != entry && entry->file->type == 'h')
            entry->file = entry->file->file;
        if (entry->file == entry)      /* a link to itself, as nobody makes them */
            entry->file = NULL;
        return FIRN_OK;
    }
    entry->target = firn_names_keep(reading->roll->items, facts->link, bytes);
    return entry->target == NULL ? FIRN_NO_MEMORY : FIRN_OK;
}

static enum firn_status enter(struct reading *reading, const struct firn_item *item,
                              const struct firn_about_facts *facts)
{
    struct firn_roll_item *entry;
    void *record;
    enum firn_status status = firn_names_add(reading->roll->items, facts->path, strlen(facts->path), &record, NULL);

    if (status != FIRN_OK)
        return status;
    entry = record;
    *entry = (struct firn_roll_item){
        .number = item->number, .type = facts->type, .chosen = is_chosen(reading, facts->path), .bytes = item->bytes,
        .known = item->summed, .file = entry
    };
    entry->needed = entry->chosen;
    if (item->summed)
        memcpy(entry->digest, item->sha256, sizeof item->sha256);
    if (facts->type == 'h' || facts->type == 'l')
        status = enter_link(reading, facts, entry);
    if (entry->file != NULL)
        entry->file->needed = entry->file->needed || entry->chosen;
    return status;
}

static enum firn_status take(void *self, const struct firn_item *item, uint64_t foreseen)
{
    struct reading *reading = self;
    struct firn_about_facts facts;
    enum firn_status status = firn_about_read(reading->about, item, &facts);

    (void)foreseen;
    if (status == FIRN_BAD_DATA) {
        reading->roll->items_unknown++;
        return FIRN_OK;
    }
    return status == FIRN_OK ? enter(reading, item, &facts) : status;
}

enum firn_status firn_roll_make(struct firn_reader *reader, const struct firn_memory *memory,
                                const struct firn_manifest_choice *choice, struct firn_fault *fault,
                                struct firn_roll *roll)
{
    struct reading reading = { .roll = roll, .patterns = choice->patterns };
    const struct firn_reader_visitor visitor = { .self = &reading, .begin = take, .digests = true };
    struct firn_reader_walk_report walked = { 0 };
    enum firn_status status;

    *roll = (struct firn_roll){ .items = NULL };
    if (firn_stored_name_make(choice->below == NULL ? "" : choice->below, reading.below, NULL) != FIRN_OK)
        return firn_fault_tell(fault, FIRN_BAD_ARGUMENT, 0, 0, "a folder's name that is too long");
    reading.below_bytes = strlen(reading.below);
    roll->below_bytes = reading.below_bytes == 0 ? 0 : reading.below_bytes + 1;
    status = firn_names_make(memory, sizeof(struct firn_roll_item), &roll->items);
    if (status == FIRN_OK)
        status = firn_about_make(memory, &reading.about);
    if (status != FIRN_OK)
        return firn_fault_tell(fault, status, 0, 0, "");
    status = firn_reader_walk(reader, &visitor, fault, &walked);
    firn_about_free(reading.about);
    roll->items_unknown += walked.items_unknown;
    roll->cut_short = walked.cut_short;
    return status;
}

void firn_roll_end(struct firn_roll *roll)
{
    firn_names_free(roll->items);
    roll->items = NULL;
}
