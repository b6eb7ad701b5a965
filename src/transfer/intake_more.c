/* transfer/intake_more.c - digests beyond SHA-256 of what is taken in */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "transfer/intake_more.h"

#include "base/memory.h"
#include "container/digest.h"

static const struct { unsigned asked; enum firn_digest_kind kind; size_t at; } kinds[] = {
    { FIRN_INTAKE_SHA512, FIRN_DIGEST_SHA512, offsetof(struct firn_intake_digests, sha512) },
    { FIRN_INTAKE_SHA1, FIRN_DIGEST_SHA1, offsetof(struct firn_intake_digests, sha1) },
    { FIRN_INTAKE_MD5, FIRN_DIGEST_MD5, offsetof(struct firn_intake_digests, md5) },
};

enum { KINDS = sizeof kinds / sizeof kinds[0] };

struct firn_intake_more {
    const struct firn_memory *memory;
    struct firn_digest *digests[KINDS];      /* NULL for those that nobody asked for */
    struct firn_intake_digests result;
    /* the item at hand */
    uint64_t bytes;
    struct firn_item_extent *extents;
    size_t extent_count, capacity;
    size_t extent;                           /* that the next byte is in */
    uint64_t extent_at;                      /* and how far into it */
    uint64_t done;                           /* bytes of the file that the digests have */
};

enum firn_status firn_intake_more_make(unsigned digests, const struct firn_memory *memory,
                                       struct firn_intake_more **out)
{
    struct firn_intake_more *more = firn_memory_get_zeroed(memory, 1, sizeof *more);
    enum firn_status status = more == NULL ? FIRN_NO_MEMORY : FIRN_OK;

    *out = NULL;
    if (more == NULL)
        return status;
    more->memory = memory;
    for (size_t i = 0; i < KINDS && status == FIRN_OK; i++)
        if ((digests & kinds[i].asked) != 0)
            status = firn_digest_make_kind(kinds[i].kind, &more->digests[i]);
    if (status != FIRN_OK) {
        firn_intake_more_free(more);
        return status;
    }
    *out = more;
    return FIRN_OK;
}

void firn_intake_more_free(struct firn_intake_more *more)
{
    if (more == NULL)
        return;
    for (size_t i = 0; i < KINDS; i++)
        firn_digest_free(more->digests[i]);
    more->memory->put(more->memory->self, more->extents);
    more->memory->put(more->memory->self, more);
}

enum firn_status firn_intake_more_start(struct firn_intake_more *more, const struct firn_item *item)
{
    void *extents = more->extents;
    enum firn_status status = firn_memory_grow(more->memory, &extents, &more->capacity, item->extent_count + 1,
                                               sizeof *more->extents);

    more->extents = extents;
    if (status != FIRN_OK)
        return status;
    if (item->extent_count > 0)
        memcpy(more->extents, item->extents, item->extent_count * sizeof *more->extents);
    more->extent_count = item->extent_count;
    more->bytes = item->bytes;
    more->extent = 0;
    more->extent_at = more->done = 0;
    for (size_t i = 0; i < KINDS; i++)
        if (more->digests[i] != NULL)
            firn_digest_start(more->digests[i]);
    return FIRN_OK;
}

static void add_all(struct firn_intake_more *more, const uint8_t *bytes, uint64_t count)
{
    for (size_t i = 0; i < KINDS; i++) {
        if (more->digests[i] == NULL)
            continue;
        if (bytes == NULL)
            firn_digest_add_zeros(more->digests[i], count);
        else
            firn_digest_add(more->digests[i], bytes, (size_t)count);
    }
    more->done += count;
}

void firn_intake_more_add(struct firn_intake_more *more, const uint8_t *bytes, size_t count)
{
    while (count > 0 && more->extent < more->extent_count) {
        const struct firn_item_extent *extent = &more->extents[more->extent];
        uint64_t left = extent->bytes - more->extent_at;
        size_t step = count < left ? count : (size_t)left;

        add_all(more, NULL, extent->at + more->extent_at - more->done);
        add_all(more, bytes, step);
        bytes += step;
        count -= step;
        more->extent_at += step;
        if (more->extent_at == extent->bytes) {
            more->extent++;
            more->extent_at = 0;
        }
    }
}

const struct firn_intake_digests *firn_intake_more_finish(struct firn_intake_more *more)
{
    add_all(more, NULL, more->bytes - more->done);
    for (size_t i = 0; i < KINDS; i++)
        if (more->digests[i] != NULL)
            firn_digest_finish(more->digests[i], (uint8_t *)&more->result + kinds[i].at);
    return &more->result;
}
