/* care/collate.c - sources gone through, blocks put in their places, damaged ones kept */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "firn/collate.h"

#include "base/fault.h"
#include "base/memory.h"
#include "base/text.h"
#include "care/collate_settle.h"
#include "container/ballot.h"
#include "container/finder.h"
#include "container/sheets.h"
#include "container/title.h"

/* One source being gone through. */
struct taking {
    struct firn_collate *collate;
    const char *name;
    struct firn_store *store;
    struct firn_fault *fault;
    struct firn_collate_share shares[FIRN_COLLATE_CONTAINERS_MAX];
};

enum firn_status firn_collate_open(const struct firn_collate_options *options, struct firn_collate **out,
                                   struct firn_fault *fault)
{
    struct firn_collate *collate = firn_memory_get_zeroed(options->memory, 1, sizeof *collate);
    enum firn_status status;

    *out = NULL;
    if (collate == NULL)
        return firn_fault_tell(fault, FIRN_NO_MEMORY, 0, 0, "");
    collate->options = options;
    collate->memory = options->memory;
    status = firn_collate_map_make(options->scratch, options->memory, &collate->map, fault);
    if (status != FIRN_OK) {
        firn_collate_free(collate);
        return status;
    }
    *out = collate;
    return FIRN_OK;
}

static void container_free(struct firn_collate *collate, struct firn_collate_run_container *container)
{
    if (container == NULL)
        return;
    firn_store_stage_close(container->stage);
    collate->memory->put(collate->memory->self, container->path);
    collate->memory->put(collate->memory->self, container);
}

void firn_collate_free(struct firn_collate *collate)
{
    const struct firn_memory *memory;

    if (collate == NULL)
        return;
    memory = collate->memory;
    for (unsigned i = 0; i < collate->count; i++)
        container_free(collate, collate->containers[i]);
    for (size_t i = 0; i < collate->share_count; i++)
        memory->put(memory->self, collate->shares[i].name);
    memory->put(memory->self, collate->shares);
    firn_collate_map_free(collate->map);
    memory->put(memory->self, collate);
}

/* --- containers --- */

static bool same_container(const struct firn_block_tag *a, const struct firn_block_tag *b)
{
    return memcmp(a->id, b->id, sizeof a->id) == 0 && a->geometry.k == b->geometry.k &&
           a->geometry.m == b->geometry.m && a->geometry.depth == b->geometry.depth;
}

/* The path of a container's file: as given, or its id in the folder; a second one of the same id gets a number. */
static char *make_path(const struct firn_collate *collate, const struct firn_block_tag *tag)
{
    const struct firn_collate_options *options = collate->options;
    size_t room = strlen(options->output) + 64;
    char *path = collate->memory->get(collate->memory->self, room);
    unsigned before = 0;
    struct firn_text text;

    if (path == NULL)
        return NULL;
    firn_text_start(&text, path, room);
    firn_text_add(&text, "%s", options->output);
    if (!options->into_folder)
        return path;
    firn_text_add(&text, options->output[strlen(options->output) - 1] == '/' ? "" : "/");
    firn_text_add_hex(&text, tag->id, sizeof tag->id);
    for (unsigned i = 0; i < collate->count; i++)
        before += memcmp(collate->containers[i]->like.id, tag->id, sizeof tag->id) == 0;
    if (before > 0)
        firn_text_add(&text, "-%u", before + 1);
    firn_text_add(&text, ".firn");
    return path;
}

static enum firn_status tell_second(const struct firn_collate *collate, const struct firn_block_tag *tag,
                                    struct firn_fault *fault)
{
    char words[sizeof fault->what];
    struct firn_text text;

    firn_text_start(&text, words, sizeof words);
    firn_text_add_hex(&text, collate->containers[0]->like.id, sizeof tag->id);
    firn_text_add(&text, " and ");
    firn_text_add_hex(&text, tag->id, sizeof tag->id);
    return firn_fault_tell(fault, FIRN_BAD_ARGUMENT, 0, 0, words);
}

static enum firn_status make_container(struct firn_collate *collate, const struct firn_block_tag *tag,
                                       struct firn_fault *fault)
{
    const struct firn_collate_options *options = collate->options;
    struct firn_collate_run_container *container;
    enum firn_status status;

    if (collate->count > 0 && !options->into_folder)
        return tell_second(collate, tag, fault);
    if (collate->count == FIRN_COLLATE_CONTAINERS_MAX)
        return firn_fault_tell(fault, FIRN_OVER_LIMIT, 0, 0, "more than 128 containers in these sources");
    container = firn_memory_get_zeroed(collate->memory, 1, sizeof *container);
    if (container == NULL)
        return firn_fault_tell(fault, FIRN_NO_MEMORY, 0, 0, "");
    container->like = *tag;
    memcpy(container->told.id, tag->id, sizeof tag->id);
    container->path = make_path(collate, tag);
    status = container->path == NULL ? firn_fault_tell(fault, FIRN_NO_MEMORY, 0, 0, "")
                                     : firn_store_stage_open(container->path, options->replace, collate->memory,
                                                             &container->stage, fault);
    if (status != FIRN_OK) {
        container_free(collate, container);
        return status;
    }
    container->store = firn_store_stage_store(container->stage);
    collate->containers[collate->count++] = container;
    return FIRN_OK;
}

/* The container of a tag, made if it is new. FIRN_END: nobody wants it. */
static enum firn_status find_container(struct firn_collate *collate, const struct firn_block_tag *tag, unsigned *index,
                                       struct firn_fault *fault)
{
    const uint8_t *only = collate->options->only_id;

    if (tag->number >= FIRN_COLLATE_MAP_BLOCKS_MAX ||
        tag->number / firn_sheet_full_blocks(&tag->geometry) >= FIRN_COLLATE_MAP_SHEETS_MAX ||
        (only != NULL && memcmp(only, tag->id, sizeof tag->id) != 0))
        return FIRN_END;
    for (*index = 0; *index < collate->count; (*index)++)
        if (same_container(&collate->containers[*index]->like, tag))
            return FIRN_OK;
    return make_container(collate, tag, fault);
}

/* --- blocks --- */

static enum firn_status place_good(struct taking *t, unsigned index, uint64_t number, const uint8_t *bytes)
{
    struct firn_collate_run_container *container = t->collate->containers[index];
    uint64_t at = firn_sheets_place(number);
    int why = 0;
    enum firn_status status = container->store->write_at(container->store->self, at, bytes, FIRN_BLOCK_BYTES, &why);

    if (status != FIRN_OK)
        return firn_fault_tell(t->fault, status, why, at, container->path);
    return firn_collate_map_set(t->collate->map, index, number, FIRN_COLLATE_MAP_GOOD, t->fault);
}

/* A good block whose place has one already: is it the same? */
static enum firn_status compare_known(struct taking *t, unsigned index, uint64_t number, const uint8_t *bytes)
{
    struct firn_collate_run_container *container = t->collate->containers[index];
    uint64_t at = firn_sheets_place(number) + FIRN_BLOCK_HASH_AT;
    uint8_t hash[16];
    size_t got = 0;
    int why = 0;
    enum firn_status status = container->store->read_at(container->store->self, at, hash, sizeof hash, &got, &why);

    if (status != FIRN_OK || got < sizeof hash)
        return firn_fault_tell(t->fault, FIRN_IO, why, at, container->path);
    t->shares[index].known++;
    container->told.contradicting += memcmp(hash, bytes + FIRN_BLOCK_HASH_AT, sizeof hash) != 0;
    return FIRN_OK;
}

static enum firn_status take_good(struct taking *t, unsigned index, const struct firn_finder_block *block)
{
    struct firn_collate_container *told = &t->collate->containers[index]->told;
    uint64_t entry = FIRN_COLLATE_MAP_NOTHING;
    enum firn_status status = firn_collate_map_get(t->collate->map, index, block->tag.number, &entry, t->fault);

    if (status != FIRN_OK)
        return status;
    if (entry == FIRN_COLLATE_MAP_GOOD)
        return compare_known(t, index, block->tag.number, block->bytes);
    if (block->state == FIRN_BLOCK_SOUND) {
        t->shares[index].found++;
        told->found++;
    } else {
        t->shares[index].mended++;
        told->mended++;
    }
    return place_good(t, index, block->tag.number, block->bytes);
}

/* Reads a damaged block again, if so asked, and else keeps it for the vote. */
static enum firn_status take_damaged(struct taking *t, unsigned index, const struct firn_finder_block *block)
{
    struct firn_collate *collate = t->collate;
    uint64_t entry = FIRN_COLLATE_MAP_NOTHING, number = block->tag.number;
    enum firn_status status = firn_collate_map_get(collate->map, index, number, &entry, t->fault);
    uint8_t again[FIRN_BLOCK_BYTES];
    struct firn_block_tag tag;

    if (status != FIRN_OK || entry == FIRN_COLLATE_MAP_GOOD)
        return status;
    memcpy(again, block->bytes, sizeof again);
    if (collate->options->readings > 0 &&
        firn_ballot_reread(t->store, block->at, collate->options->readings, true, collate->memory, again) == FIRN_OK &&
        firn_block_open(again, true, &tag) == FIRN_BLOCK_SOUND && tag.number == number &&
        same_container(&tag, &collate->containers[index]->like)) {
        t->shares[index].reread++;
        collate->containers[index]->told.reread++;
        return place_good(t, index, number, again);
    }
    t->shares[index].damaged++;
    return firn_collate_map_keep(collate->map, index, number, block->bytes, t->fault);
}

static enum firn_status take_block(void *self, const struct firn_finder_block *block)
{
    struct taking *t = self;
    struct firn_collate_run_container *container;
    unsigned index;
    enum firn_status status = find_container(t->collate, &block->tag, &index, t->fault);

    if (status != FIRN_OK)
        return status == FIRN_END ? FIRN_OK : status;
    container = t->collate->containers[index];
    if (block->tag.number >= container->end)
        container->end = block->tag.number + 1;
    if (block->page != NULL && !container->has_page && firn_title_looks_right(block->page)) {
        memcpy(container->page, block->page, sizeof container->page);
        container->has_page = true;
    }
    return block->state == FIRN_BLOCK_GONE ? take_damaged(t, index, block) : take_good(t, index, block);
}

/* --- shares --- */

static enum firn_status keep_share(struct firn_collate *collate, const char *name,
                                   const struct firn_collate_share *share, const uint8_t *id)
{
    struct firn_collate_run_share *kept;
    size_t bytes = strlen(name) + 1;
    void *shares = collate->shares;
    enum firn_status status = firn_memory_grow(collate->memory, &shares, &collate->share_capacity,
                                               collate->share_count + 1, sizeof *kept);

    collate->shares = shares;
    if (status != FIRN_OK)
        return status;
    kept = &collate->shares[collate->share_count];
    *kept = (struct firn_collate_run_share){ *share, collate->memory->get(collate->memory->self, bytes) };
    if (kept->name == NULL)
        return FIRN_NO_MEMORY;
    memcpy(kept->name, name, bytes);
    kept->told.source = kept->name;
    memcpy(kept->told.id, id, sizeof kept->told.id);
    collate->share_count++;
    return FIRN_OK;
}

static bool gave_anything(const struct firn_collate_share *share)
{
    return share->found + share->mended + share->reread + share->damaged + share->known > 0;
}

static void pass_progress(void *self, uint64_t at, uint64_t bytes)
{
    const struct firn_collate_options *options = ((struct taking *)self)->collate->options;

    if (options->progress != NULL)
        options->progress(options->self, at, bytes);
}

static bool pass_stop(void *self)
{
    const struct firn_collate_options *options = ((struct taking *)self)->collate->options;

    return options->stop != NULL && options->stop(options->self);
}

enum firn_status firn_collate_take(struct firn_collate *collate, const char *name, struct firn_store *store,
                                   struct firn_collate_source *source, struct firn_fault *fault)
{
    struct taking t = { .collate = collate, .name = name, .store = store, .fault = fault };
    struct firn_finder_visitor visitor = {
        .self = &t, .block = take_block, .progress = pass_progress, .stop = pass_stop,
        .readings = collate->options->readings
    };
    struct firn_finder_report found;
    enum firn_status status = firn_finder_run(store, collate->memory, &visitor, &found, fault);

    *source = (struct firn_collate_source){
        .bytes = found.bytes, .unreadable_bytes = found.unreadable_bytes, .good = found.good + found.mended,
        .damaged = found.damaged
    };
    if (status == FIRN_STOPPED)
        (void)firn_fault_tell(fault, status, 0, 0, name);
    for (unsigned i = 0; i < collate->count && status == FIRN_OK; i++)
        if (gave_anything(&t.shares[i]))
            status = keep_share(collate, name, &t.shares[i], collate->containers[i]->like.id);
    return status;
}

enum firn_status firn_collate_finish(struct firn_collate *collate, struct firn_fault *fault)
{
    const struct firn_collate_options *options = collate->options;
    enum firn_status status = FIRN_OK;

    if (collate->count == 0)
        return firn_fault_tell(fault, FIRN_NOT_CONTAINER, 0, 0, "");
    for (size_t i = 0; i < collate->share_count && options->share != NULL; i++)
        options->share(options->self, &collate->shares[i].told);
    for (unsigned i = 0; i < collate->count && status == FIRN_OK; i++) {
        status = firn_collate_settle(collate, i, fault);
        if (status == FIRN_OK && options->container != NULL)
            options->container(options->self, &collate->containers[i]->told);
        container_free(collate, collate->containers[i]);
        collate->containers[i] = NULL;
    }
    return status;
}
