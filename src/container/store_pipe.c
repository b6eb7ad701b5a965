/* container/store_pipe.c - a descriptor that cannot be searched, as a store that only takes bytes in order */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "firn/store.h"

#include "container/store_file.h"

#include <errno.h>
#include <poll.h>
#include <unistd.h>

struct pipe {
    const struct firn_memory *memory;
    int descriptor;
    uint64_t next;      /* where the last write ended */
};

static enum firn_status pipe_read_at(void *self, uint64_t at, void *bytes, size_t count, size_t *got, int *os_error)
{
    (void)self, (void)at, (void)bytes, (void)count;
    *got = 0;
    *os_error = ESPIPE;
    return FIRN_IO;
}

static enum firn_status pipe_write_at(void *self, uint64_t at, const void *bytes, size_t count, int *os_error)
{
    struct pipe *pipe = self;
    const char *from = bytes;

    *os_error = at == pipe->next ? 0 : ESPIPE;
    while (*os_error == 0 && count > 0) {
        ssize_t done = write(pipe->descriptor, from, count < 1 << 30 ? count : 1 << 30);

        if (done >= 0) {
            from += done;
            count -= (size_t)done;
            pipe->next += (uint64_t)done;
        } else if (errno == EAGAIN || errno == EWOULDBLOCK) {
            firn_store_file_await(pipe->descriptor, POLLOUT);
        } else if (errno != EINTR) {
            *os_error = errno;
        }
    }
    return *os_error == 0 ? FIRN_OK : FIRN_IO;
}

static enum firn_status pipe_size(void *self, uint64_t *bytes, int *os_error)
{
    *bytes = ((struct pipe *)self)->next;
    *os_error = 0;
    return FIRN_OK;
}

static enum firn_status pipe_resize(void *self, uint64_t bytes, int *os_error)
{
    *os_error = bytes == ((struct pipe *)self)->next ? 0 : ESPIPE;
    return *os_error == 0 ? FIRN_OK : FIRN_IO;
}

static enum firn_status pipe_sync(void *self, int *os_error)
{
    struct pipe *pipe = self;

    *os_error = 0;
    while (fsync(pipe->descriptor) != 0) {
        if (errno == EINVAL || errno == EROFS || errno == ENOTSUP)      /* nothing there that could be synced */
            return FIRN_OK;
        if (errno != EINTR) {
            *os_error = errno;
            return FIRN_IO;
        }
    }
    return FIRN_OK;
}

static void pipe_forget(void *self, uint64_t at, uint64_t bytes)
{
    (void)self, (void)at, (void)bytes;
}

static void pipe_close(void *self)
{
    struct pipe *pipe = self;

    pipe->memory->put(pipe->memory->self, pipe);
}

enum firn_status firn_store_pipe(int descriptor, const struct firn_memory *memory, struct firn_store *store)
{
    struct pipe *pipe = memory->get(memory->self, sizeof *pipe);

    if (pipe == NULL)
        return FIRN_NO_MEMORY;
    *pipe = (struct pipe){ .memory = memory, .descriptor = descriptor };
    *store = (struct firn_store){ pipe, pipe_read_at, pipe_write_at, pipe_size, pipe_resize, pipe_sync, pipe_forget,
                                  pipe_close, NULL };
    return FIRN_OK;
}
