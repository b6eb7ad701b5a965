/* transfer/names.c - a growing set of byte strings: open addressing over entries in large chunks */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "transfer/names.h"

#include "base/memory.h"
#include "guard/hash.h"

#include <stdint.h>
#include <string.h>

enum { CHUNK_BYTES = 1 << 16, ALIGNMENT = 16, FIRST_SLOTS = 64 };

struct entry {
    _Alignas(ALIGNMENT) uint64_t hash;
    size_t key_bytes;
    /* record_bytes, then the key and its NUL */
};

struct chunk {
    struct chunk *before;
    size_t room, used;
};

struct firn_names {
    const struct firn_memory *memory;
    size_t record_bytes;           /* rounded up to ALIGNMENT */
    struct chunk *chunks;          /* newest first */
    struct entry **entries;        /* in the order of adding */
    size_t count, capacity;
    struct entry **slots;          /* a power of two of them, at most half in use */
    size_t slot_count;
};

_Static_assert(sizeof(struct entry) % ALIGNMENT == 0, "a record follows its entry aligned");

static size_t rounded(size_t bytes)
{
    return (bytes + ALIGNMENT - 1) / ALIGNMENT * ALIGNMENT;
}

static uint8_t *record_of(struct entry *entry)
{
    return (uint8_t *)(entry + 1);
}

static uint8_t *key_of(const struct firn_names *names, struct entry *entry)
{
    return record_of(entry) + names->record_bytes;
}

enum firn_status firn_names_make(const struct firn_memory *memory, size_t record_bytes, struct firn_names **out)
{
    struct firn_names *names = firn_memory_get_zeroed(memory, 1, sizeof *names);

    *out = NULL;
    if (names == NULL)
        return FIRN_NO_MEMORY;
    names->memory = memory;
    names->record_bytes = rounded(record_bytes);
    names->slot_count = FIRST_SLOTS;
    names->slots = firn_memory_get_zeroed(memory, FIRST_SLOTS, sizeof(struct entry *));
    if (names->slots == NULL) {
        firn_names_free(names);
        return FIRN_NO_MEMORY;
    }
    *out = names;
    return FIRN_OK;
}

void firn_names_free(struct firn_names *names)
{
    if (names == NULL)
        return;
    while (names->chunks != NULL) {
        struct chunk *before = names->chunks->before;

        names->memory->put(names->memory->self, names->chunks);
        names->chunks = before;
    }
    names->memory->put(names->memory->self, names->entries);
    names->memory->put(names->memory->self, names->slots);
    names->memory->put(names->memory->self, names);
}

static void *take(struct firn_names *names, size_t bytes)
{
    struct chunk *chunk = names->chunks;
    void *taken;

    bytes = rounded(bytes);
    if (chunk == NULL || chunk->room - chunk->used < bytes) {
        size_t head = rounded(sizeof *chunk);
        size_t room = bytes > CHUNK_BYTES - head ? bytes + head : CHUNK_BYTES;

        chunk = names->memory->get(names->memory->self, room);
        if (chunk == NULL)
            return NULL;
        *chunk = (struct chunk){ .before = names->chunks, .room = room, .used = head };
        names->chunks = chunk;
    }
    taken = (uint8_t *)chunk + chunk->used;
    chunk->used += bytes;
    return taken;
}

/* The slot that holds the key, or the free one where it belongs; there is one, since half the slots are free. */
static struct entry **slot_of(const struct firn_names *names, uint64_t hash, const void *key, size_t key_bytes)
{
    size_t mask = names->slot_count - 1;
    size_t at = (size_t)hash & mask;

    while (names->slots[at] != NULL) {
        struct entry *entry = names->slots[at];

        if (entry->hash == hash && entry->key_bytes == key_bytes
            && memcmp(key_of(names, entry), key, key_bytes) == 0)
            break;
        at = (at + 1) & mask;
    }
    return &names->slots[at];
}

static enum firn_status widen(struct firn_names *names)
{
    size_t before = names->slot_count;
    struct entry **slots;

    if (names->count < before / 2)
        return FIRN_OK;
    slots = firn_memory_get_zeroed(names->memory, before, 2 * sizeof(struct entry *));
    if (slots == NULL)
        return FIRN_NO_MEMORY;
    names->memory->put(names->memory->self, names->slots);
    names->slots = slots;
    names->slot_count = 2 * before;
    for (size_t i = 0; i < names->count; i++) {
        size_t at = (size_t)names->entries[i]->hash & (names->slot_count - 1);

        while (slots[at] != NULL)
            at = (at + 1) & (names->slot_count - 1);
        slots[at] = names->entries[i];
    }
    return FIRN_OK;
}

void *firn_names_find(const struct firn_names *names, const void *key, size_t key_bytes)
{
    struct entry *entry = *slot_of(names, firn_hash_low(key, key_bytes), key, key_bytes);

    return entry == NULL ? NULL : record_of(entry);
}

enum firn_status firn_names_add(struct firn_names *names, const void *key, size_t key_bytes, void **record, bool *fresh)
{
    uint64_t hash = firn_hash_low(key, key_bytes);
    struct entry *entry = *slot_of(names, hash, key, key_bytes);
    void *entries = names->entries;
    enum firn_status status;

    *record = NULL;
    if (fresh != NULL)
        *fresh = entry == NULL;
    if (entry == NULL) {
        status = firn_memory_grow(names->memory, &entries, &names->capacity, names->count + 1, sizeof(struct entry *));
        names->entries = entries;
        if (status == FIRN_OK)
            status = widen(names);
        if (status != FIRN_OK)
            return status;
        entry = take(names, sizeof *entry + names->record_bytes + key_bytes + 1);
        if (entry == NULL)
            return FIRN_NO_MEMORY;
        memset(entry, 0, sizeof *entry + names->record_bytes + key_bytes + 1);
        *entry = (struct entry){ .hash = hash, .key_bytes = key_bytes };
        memcpy(key_of(names, entry), key, key_bytes);
        names->entries[names->count++] = entry;
        *slot_of(names, hash, key, key_bytes) = entry;
    }
    *record = record_of(entry);
    return FIRN_OK;
}

size_t firn_names_count(const struct firn_names *names)
{
    return names->count;
}

void *firn_names_at(const struct firn_names *names, size_t index, const char **key)
{
    *key = (const char *)key_of(names, names->entries[index]);
    return record_of(names->entries[index]);
}

char *firn_names_keep(struct firn_names *names, const char *bytes, size_t count)
{
    char *copy = take(names, count + 1);

    if (copy == NULL)
        return NULL;
    memcpy(copy, bytes, count);
    copy[count] = '\0';
    return copy;
}
