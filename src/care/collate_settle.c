/* care/collate_settle.c - votes over damaged copies, then the reserve, then the title page, then a look at all of it */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "care/collate_settle.h"

#include "base/fault.h"
#include "container/ballot.h"
#include "container/sheets.h"

#include <string.h>

struct settling {
    struct firn_collate *collate;
    unsigned index;
    struct firn_collate_run_container *container;
    struct firn_store *store;
    uint8_t *copies;      /* room for FIRN_COLLATE_CANDIDATES_MAX blocks */
};

static bool should_stop(const struct settling *s)
{
    return s->collate->options->stop != NULL && s->collate->options->stop(s->collate->options->self);
}

static enum firn_status put(struct settling *s, uint64_t at, const uint8_t *bytes, struct firn_fault *fault)
{
    int why = 0;
    enum firn_status status = s->store->write_at(s->store->self, at, bytes, FIRN_BLOCK_BYTES, &why);

    return status == FIRN_OK ? FIRN_OK : firn_fault_tell(fault, status, why, at, s->container->path);
}

/* --- votes --- */

/* Decides over the copies of one block. What cannot be decided goes to its place as the majority has it. */
static enum firn_status vote(struct settling *s, uint64_t number, uint64_t entry, struct firn_fault *fault)
{
    const uint8_t *copies[FIRN_COLLATE_CANDIDATES_MAX];
    uint8_t block[FIRN_BLOCK_BYTES];
    struct firn_block_tag tag;
    enum firn_block_state state;
    enum firn_status status;
    size_t count;
    bool good;

    status = firn_collate_map_fetch(s->collate->map, entry, FIRN_COLLATE_CANDIDATES_MAX, s->copies, &count, fault);
    if (status != FIRN_OK)
        return status;
    for (size_t i = 0; i < count; i++)
        copies[i] = s->copies + i * FIRN_BLOCK_BYTES;
    state = firn_ballot_decide(copies, count, block, &tag);
    good = (state == FIRN_BLOCK_SOUND || state == FIRN_BLOCK_MENDED) && tag.number == number &&
           memcmp(tag.id, s->container->like.id, sizeof tag.id) == 0;
    status = put(s, firn_sheets_place(number), block, fault);
    if (status != FIRN_OK || !good)
        return status;
    s->container->told.voted++;
    return firn_collate_map_set(s->collate->map, s->index, number, FIRN_COLLATE_MAP_GOOD, fault);
}

static enum firn_status vote_all(struct settling *s, struct firn_fault *fault)
{
    enum firn_status status = FIRN_OK;
    uint64_t entry = FIRN_COLLATE_MAP_NOTHING;

    for (uint64_t number = 0; number < s->container->end && status == FIRN_OK; number++) {
        status = firn_collate_map_get(s->collate->map, s->index, number, &entry, fault);
        if (status == FIRN_OK && entry > FIRN_COLLATE_MAP_GOOD)
            status = should_stop(s) ? FIRN_STOPPED : vote(s, number, entry, fault);
    }
    return status;
}

/* --- the reserve --- */

/* How many blocks of a sheet are good, and of how many nothing is known at all. */
static enum firn_status count_known(struct settling *s, uint64_t first, uint32_t count, uint32_t *good,
                                    uint32_t *unknown, struct firn_fault *fault)
{
    enum firn_status status = FIRN_OK;

    *good = *unknown = 0;
    for (uint32_t i = 0; i < count && status == FIRN_OK; i++) {
        uint64_t entry = FIRN_COLLATE_MAP_NOTHING;

        if (first + i < s->container->end)
            status = firn_collate_map_get(s->collate->map, s->index, first + i, &entry, fault);
        *good += entry == FIRN_COLLATE_MAP_GOOD;
        *unknown += entry == FIRN_COLLATE_MAP_NOTHING;
    }
    return status;
}

static enum firn_status mend_sheet(struct settling *s, struct firn_sheets *sheets, uint64_t index,
                                   struct firn_fault *fault)
{
    struct firn_collate_container *told = &s->container->told;
    const enum firn_sheets_finding *findings;
    struct firn_sheet_shape shape;
    const uint8_t *blocks;
    uint32_t count, good, unknown, missing;
    uint64_t first;
    enum firn_status status;

    firn_sheets_shape(sheets, index, &shape, &first);
    count = shape.data_blocks + shape.reserve_blocks;
    status = count_known(s, first, count, &good, &unknown, fault);
    if (status != FIRN_OK || good == count)
        return status;
    if (unknown == count) {
        told->lost += count;
        return FIRN_OK;
    }
    status = firn_sheets_mend(sheets, index, &blocks, &findings, &missing);
    for (uint32_t i = 0; i < count && status == FIRN_OK; i++) {
        told->lost += findings[i] == FIRN_SHEETS_LOST;
        if (findings[i] == FIRN_SHEETS_SOUND || findings[i] == FIRN_SHEETS_LOST)
            continue;
        told->rebuilt++;
        status = put(s, firn_sheets_place(first + i), blocks + (size_t)i * FIRN_BLOCK_BYTES, fault);
    }
    return status;
}

/* The file ends where the container does, with a hole where its last blocks are lost. */
static enum firn_status settle_size(struct settling *s, const struct firn_reader_layout *layout,
                                    struct firn_fault *fault)
{
    uint64_t wanted = firn_sheets_place(layout->blocks), bytes;
    int why = 0;
    enum firn_status status = s->store->size(s->store->self, &bytes, &why);

    if (status == FIRN_OK && bytes != wanted && (bytes < wanted || layout->end_known))
        status = s->store->resize(s->store->self, wanted, &why);
    return status == FIRN_OK ? FIRN_OK : firn_fault_tell(fault, status, why, 0, s->container->path);
}

static enum firn_status mend_all(struct settling *s, const struct firn_sheets_options *options,
                                 struct firn_fault *fault)
{
    const struct firn_reader_layout *layout;
    struct firn_sheets *sheets;
    uint64_t full;
    enum firn_status status = firn_sheets_open(options, fault, &sheets);

    if (status != FIRN_OK)
        return status;
    layout = firn_sheets_layout(sheets);
    full = firn_sheet_full_blocks(&layout->geometry) * (uint64_t)FIRN_BLOCK_BYTES;
    s->container->told.blocks = layout->blocks;
    for (uint64_t i = 0; i < layout->sheets && status == FIRN_OK; i++) {
        status = mend_sheet(s, sheets, i, fault);
        if (s->collate->options->progress != NULL)
            s->collate->options->progress(s->collate->options->self, (i + 1) * full, layout->sheets * full);
    }
    if (status == FIRN_OK)
        status = settle_size(s, layout, fault);
    firn_sheets_close(sheets);
    return status;
}

/* --- the title page --- */

static enum firn_status settle_title(struct settling *s, struct firn_fault *fault)
{
    const struct firn_collate_options *options = s->collate->options;
    struct firn_reader_options reader_options = {
        .store = s->store, .memory = options->memory, .threads = options->threads, .stop = options->stop,
        .stop_self = options->self
    };
    struct firn_collate_container *told = &s->container->told;
    uint8_t page[FIRN_BLOCK_BYTES];
    struct firn_reader *reader;
    enum firn_status status = firn_reader_open(&reader_options, fault, &reader);

    if (status != FIRN_OK)
        return status;
    told->end_known = firn_reader_layout_of(reader)->end_known;
    if (firn_reader_title_page(reader, page) == FIRN_OK)
        told->title = FIRN_COLLATE_TITLE_PROTECTED;
    else if (s->container->has_page)
        told->title = FIRN_COLLATE_TITLE_UNPROTECTED;
    else
        told->title = FIRN_COLLATE_TITLE_NONE;
    firn_reader_free(reader);
    if (told->title == FIRN_COLLATE_TITLE_NONE)
        return FIRN_OK;
    return put(s, 0, told->title == FIRN_COLLATE_TITLE_PROTECTED ? page : s->container->page, fault);
}

/* --- reading back --- */

/* Checks every sheet of the file again that should be whole: no more may be lost than was told. */
static enum firn_status read_back(struct settling *s, const struct firn_sheets_options *options,
                                  struct firn_fault *fault)
{
    const enum firn_sheets_finding *findings;
    struct firn_sheets *sheets;
    uint64_t lost = 0;
    int why = 0;
    enum firn_status status = s->store->sync(s->store->self, &why);

    if (status != FIRN_OK)
        return firn_fault_tell(fault, status, why, 0, s->container->path);
    s->store->forget(s->store->self, 0, firn_sheets_place(s->container->told.blocks));
    status = firn_sheets_open(options, fault, &sheets);
    if (status != FIRN_OK)
        return status;
    for (uint64_t i = 0; i < firn_sheets_layout(sheets)->sheets && status == FIRN_OK; i++) {
        struct firn_sheet_shape shape;
        uint64_t first;
        uint32_t missing, good, unknown, count;
        const uint8_t *blocks;
        bool clean = false;

        firn_sheets_shape(sheets, i, &shape, &first);
        count = shape.data_blocks + shape.reserve_blocks;
        status = count_known(s, first, count, &good, &unknown, fault);
        if (status == FIRN_OK && unknown == count) {
            lost += count;
            continue;
        }
        if (status == FIRN_OK)
            status = firn_sheets_check(sheets, i, &clean);
        if (status != FIRN_OK || clean)
            continue;
        status = firn_sheets_mend(sheets, i, &blocks, &findings, &missing);
        for (uint32_t j = 0; j < count && status == FIRN_OK; j++)
            lost += findings[j] != FIRN_SHEETS_SOUND;
    }
    firn_sheets_close(sheets);
    if (status == FIRN_OK && lost != s->container->told.lost)
        status = firn_fault_tell(fault, FIRN_MISMATCH, 0, 0, "reading back what was written");
    return status;
}

enum firn_status firn_collate_settle(struct firn_collate *collate, unsigned index, struct firn_fault *fault)
{
    const struct firn_collate_options *options = collate->options;
    struct firn_collate_run_container *container = collate->containers[index];
    struct settling s = { .collate = collate, .index = index, .container = container, .store = container->store };
    struct firn_sheets_options sheets = {
        .store = s.store, .memory = options->memory, .threads = options->threads, .stop = options->stop,
        .stop_self = options->self
    };
    enum firn_status status;

    s.copies = collate->memory->get(collate->memory->self, FIRN_COLLATE_CANDIDATES_MAX * FIRN_BLOCK_BYTES);
    if (s.copies == NULL)
        return firn_fault_tell(fault, FIRN_NO_MEMORY, 0, 0, container->path);
    status = vote_all(&s, fault);
    collate->memory->put(collate->memory->self, s.copies);
    if (status == FIRN_OK)
        status = mend_all(&s, &sheets, fault);
    if (status == FIRN_NOT_CONTAINER || status == FIRN_FOREIGN_FORMAT)
        return FIRN_OK;
    if (status == FIRN_OK)
        status = settle_title(&s, fault);
    if (status == FIRN_OK)
        status = read_back(&s, &sheets, fault);
    if (status == FIRN_OK)
        status = firn_store_stage_keep(container->stage, fault);
    if (status == FIRN_OK)
        container->told.path = container->path;
    else if (status == FIRN_STOPPED || status == FIRN_NO_MEMORY)
        (void)firn_fault_tell(fault, status, 0, 0, container->path);
    return status;
}
