/* transfer/holes.c - which stretches of a file are data */
/* SPDX-License-Identifier: BSD-2-Clause */
#define _GNU_SOURCE     /* SEEK_DATA, SEEK_HOLE */
#include "transfer/holes.h"

#include "base/memory.h"

#include <errno.h>
#include <unistd.h>

void firn_holes_start(struct firn_holes *holes, const struct firn_memory *memory)
{
    *holes = (struct firn_holes){ .memory = memory, .shortest = 1 };
}

void firn_holes_end(struct firn_holes *holes)
{
    holes->memory->put(holes->memory->self, holes->extents);
    holes->extents = NULL;
}

void firn_holes_clear(struct firn_holes *holes)
{
    holes->count = 0;
    holes->shortest = 1;
    holes->stored_bytes = 0;
}

static uint64_t end_of(const struct firn_item_extent *extent)
{
    return extent->at + extent->bytes;
}

/* Adds an extent or lets the last one reach over to its end. */
static void put(struct firn_holes *holes, uint64_t at, uint64_t bytes)
{
    struct firn_item_extent *last = holes->count == 0 ? NULL : &holes->extents[holes->count - 1];

    if (last != NULL && at - end_of(last) < holes->shortest) {
        holes->stored_bytes += at + bytes - end_of(last);
        last->bytes = at + bytes - last->at;
    } else {
        holes->extents[holes->count++] = (struct firn_item_extent){ .at = at, .bytes = bytes };
        holes->stored_bytes += bytes;
    }
}

/* Raises the bar for holes until half of the places are free. */
static void thin_out(struct firn_holes *holes)
{
    while (holes->count > FIRN_ITEM_EXTENTS_MAX / 2) {
        size_t count = holes->count;

        holes->shortest *= 2;
        holes->count = 0;
        holes->stored_bytes = 0;
        for (size_t i = 0; i < count; i++) {
            struct firn_item_extent extent = holes->extents[i];      /* its place may be taken over */

            put(holes, extent.at, extent.bytes);
        }
    }
}

enum firn_status firn_holes_add(struct firn_holes *holes, uint64_t at, uint64_t bytes)
{
    void *array = holes->extents;
    enum firn_status status;

    if (holes->count == FIRN_ITEM_EXTENTS_MAX)
        thin_out(holes);
    status = firn_memory_grow(holes->memory, &array, &holes->capacity, holes->count + 1, sizeof *holes->extents);
    holes->extents = array;
    if (status != FIRN_OK)
        return status;
    put(holes, at, bytes);
    return FIRN_OK;
}

enum firn_status firn_holes_map(struct firn_holes *holes, int descriptor, uint64_t size)
{
    enum firn_status status = FIRN_OK;
    off_t at = 0;

    firn_holes_clear(holes);
    while (status == FIRN_OK && (uint64_t)at < size) {
        off_t data = lseek(descriptor, at, SEEK_DATA);
        off_t hole = data < 0 ? -1 : lseek(descriptor, data, SEEK_HOLE);

        if (data < 0 && errno == ENXIO)      /* nothing but a hole from here on */
            return FIRN_OK;
        if (data < 0 || hole < 0) {
            firn_holes_clear(holes);
            return firn_holes_add(holes, 0, size);
        }
        if (data < at || hole <= data)
            return FIRN_CHANGED;
        if ((uint64_t)data >= size)
            return FIRN_OK;
        if ((uint64_t)hole > size)
            hole = (off_t)size;
        status = firn_holes_add(holes, (uint64_t)data, (uint64_t)(hole - data));
        at = hole;
    }
    return status;
}
