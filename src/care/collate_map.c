/* care/collate_map.c - what is known of each block, and the damaged copies of it, in temporary files */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "care/collate_map.h"

#include "base/bytes.h"
#include "base/fault.h"
#include "base/memory.h"

enum { PAGE_ENTRIES = 2048, ENTRY_BYTES = 8, PAGE_BYTES = PAGE_ENTRIES * ENTRY_BYTES };

/* A kept copy: the place of the one before it, then the block. Places begin at 1 record, so that 0 and 1 stay free. */
enum { RECORD_BYTES = 8 + FIRN_BLOCK_BYTES };

struct page { uint8_t *bytes; uint64_t index; bool changed; };

struct firn_collate_map {
    const struct firn_memory *memory;
    struct firn_store entries, copies;
    bool entries_open, copies_open;
    uint64_t copies_end;
    struct page pages[FIRN_COLLATE_CONTAINERS_MAX];
    uint8_t record[RECORD_BYTES];
};

static enum firn_status tell(struct firn_fault *fault, enum firn_status status, int why)
{
    return firn_fault_tell(fault, status, why, 0, "a temporary file of the collation");
}

enum firn_status firn_collate_map_make(const char *folder, const struct firn_memory *memory,
                                       struct firn_collate_map **out, struct firn_fault *fault)
{
    struct firn_collate_map *map = firn_memory_get_zeroed(memory, 1, sizeof *map);
    enum firn_status status;

    *out = NULL;
    if (map == NULL)
        return firn_fault_tell(fault, FIRN_NO_MEMORY, 0, 0, "");
    map->memory = memory;
    map->copies_end = RECORD_BYTES;
    status = firn_store_temporary(folder, memory, &map->entries, fault);
    map->entries_open = status == FIRN_OK;
    if (status == FIRN_OK)
        status = firn_store_temporary(folder, memory, &map->copies, fault);
    map->copies_open = map->entries_open && status == FIRN_OK;
    if (status != FIRN_OK) {
        firn_collate_map_free(map);
        return status;
    }
    *out = map;
    return FIRN_OK;
}

void firn_collate_map_free(struct firn_collate_map *map)
{
    const struct firn_memory *memory;

    if (map == NULL)
        return;
    memory = map->memory;
    if (map->entries_open)
        map->entries.close(map->entries.self);
    if (map->copies_open)
        map->copies.close(map->copies.self);
    for (unsigned i = 0; i < FIRN_COLLATE_CONTAINERS_MAX; i++)
        memory->put(memory->self, map->pages[i].bytes);
    memory->put(memory->self, map);
}

static uint64_t page_place(unsigned container, uint64_t index)
{
    return (container * FIRN_COLLATE_MAP_BLOCKS_MAX + index * PAGE_ENTRIES) * ENTRY_BYTES;
}

/* Brings the page of a block into memory, the one before it back into the file. */
static enum firn_status turn_to(struct firn_collate_map *map, unsigned container, uint64_t number,
                                struct firn_fault *fault)
{
    struct page *page = &map->pages[container];
    uint64_t index = number / PAGE_ENTRIES;
    size_t got = 0;
    int why = 0;

    if (page->bytes != NULL && page->index == index)
        return FIRN_OK;
    if (page->bytes == NULL) {
        page->bytes = map->memory->get(map->memory->self, PAGE_BYTES);
        if (page->bytes == NULL)
            return tell(fault, FIRN_NO_MEMORY, 0);
    } else if (page->changed) {
        enum firn_status status = map->entries.write_at(map->entries.self, page_place(container, page->index),
                                                        page->bytes, PAGE_BYTES, &why);

        if (status != FIRN_OK)
            return tell(fault, status, why);
    }
    page->changed = false;
    page->index = UINT64_MAX;
    if (map->entries.read_at(map->entries.self, page_place(container, index), page->bytes, PAGE_BYTES, &got, &why)
        != FIRN_OK)
        return tell(fault, FIRN_IO, why);
    memset(page->bytes + got, 0, PAGE_BYTES - got);      /* nothing was written so far behind */
    page->index = index;
    return FIRN_OK;
}

enum firn_status firn_collate_map_get(struct firn_collate_map *map, unsigned container, uint64_t number,
                                      uint64_t *entry, struct firn_fault *fault)
{
    enum firn_status status = turn_to(map, container, number, fault);

    if (status == FIRN_OK)
        *entry = firn_bytes_get64(map->pages[container].bytes + number % PAGE_ENTRIES * ENTRY_BYTES);
    return status;
}

enum firn_status firn_collate_map_set(struct firn_collate_map *map, unsigned container, uint64_t number,
                                      uint64_t entry, struct firn_fault *fault)
{
    enum firn_status status = turn_to(map, container, number, fault);

    if (status != FIRN_OK)
        return status;
    firn_bytes_put64(map->pages[container].bytes + number % PAGE_ENTRIES * ENTRY_BYTES, entry);
    map->pages[container].changed = true;
    return FIRN_OK;
}

enum firn_status firn_collate_map_keep(struct firn_collate_map *map, unsigned container, uint64_t number,
                                       const uint8_t *block, struct firn_fault *fault)
{
    uint64_t before = FIRN_COLLATE_MAP_NOTHING;
    enum firn_status status = firn_collate_map_get(map, container, number, &before, fault);
    int why = 0;

    if (status != FIRN_OK)
        return status;
    firn_bytes_put64(map->record, before);
    memcpy(map->record + 8, block, FIRN_BLOCK_BYTES);
    status = map->copies.write_at(map->copies.self, map->copies_end, map->record, RECORD_BYTES, &why);
    if (status != FIRN_OK)
        return tell(fault, status, why);
    status = firn_collate_map_set(map, container, number, map->copies_end, fault);
    map->copies_end += RECORD_BYTES;
    return status;
}

enum firn_status firn_collate_map_fetch(struct firn_collate_map *map, uint64_t entry, size_t most, uint8_t *copies,
                                        size_t *count, struct firn_fault *fault)
{
    *count = 0;
    while (entry > FIRN_COLLATE_MAP_GOOD && *count < most) {
        size_t got = 0;
        int why = 0;
        enum firn_status status = map->copies.read_at(map->copies.self, entry, map->record, RECORD_BYTES, &got, &why);

        if (status != FIRN_OK || got < RECORD_BYTES)
            return tell(fault, FIRN_IO, why);
        memcpy(copies + *count * FIRN_BLOCK_BYTES, map->record + 8, FIRN_BLOCK_BYTES);
        (*count)++;
        entry = firn_bytes_get64(map->record);
    }
    return FIRN_OK;
}
