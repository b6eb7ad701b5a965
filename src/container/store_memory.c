/* container/store_memory.c - lent memory as a store */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "firn/store.h"

#include <errno.h>
#include <string.h>

static enum firn_status memory_read_at(void *self, uint64_t at, void *bytes, size_t count, size_t *got, int *os_error)
{
    struct firn_store_buffer *buffer = self;
    size_t left = at < buffer->used ? buffer->used - (size_t)at : 0;

    *os_error = 0;
    *got = count < left ? count : left;
    if (*got > 0)
        memcpy(bytes, buffer->bytes + at, *got);
    return FIRN_OK;
}

static enum firn_status memory_resize(void *self, uint64_t bytes, int *os_error)
{
    struct firn_store_buffer *buffer = self;

    *os_error = bytes > buffer->capacity ? ENOSPC : 0;
    if (*os_error != 0)
        return FIRN_IO;
    if (bytes > buffer->used)
        memset(buffer->bytes + buffer->used, 0, (size_t)bytes - buffer->used);
    buffer->used = (size_t)bytes;
    return FIRN_OK;
}

static enum firn_status memory_write_at(void *self, uint64_t at, const void *bytes, size_t count, int *os_error)
{
    struct firn_store_buffer *buffer = self;

    *os_error = at > buffer->capacity || count > buffer->capacity - at ? ENOSPC : 0;
    if (*os_error != 0)
        return FIRN_IO;
    if (at + count > buffer->used)
        (void)memory_resize(self, at + count, os_error);
    if (count > 0)
        memcpy(buffer->bytes + at, bytes, count);
    return FIRN_OK;
}

static enum firn_status memory_size(void *self, uint64_t *bytes, int *os_error)
{
    *bytes = ((struct firn_store_buffer *)self)->used;
    *os_error = 0;
    return FIRN_OK;
}

static enum firn_status memory_sync(void *self, int *os_error)
{
    (void)self;
    *os_error = 0;
    return FIRN_OK;
}

static void memory_forget(void *self, uint64_t at, uint64_t bytes)
{
    (void)self, (void)at, (void)bytes;
}

static void memory_close(void *self)
{
    (void)self;
}

void firn_store_memory(struct firn_store_buffer *buffer, struct firn_store *store)
{
    *store = (struct firn_store){ buffer, memory_read_at, memory_write_at, memory_size, memory_resize, memory_sync,
                                  memory_forget, memory_close, NULL };
}
