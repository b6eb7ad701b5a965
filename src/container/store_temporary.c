/* container/store_temporary.c - files that nobody else sees and that are gone when closed */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "firn/store.h"

#include "base/fault.h"
#include "container/store_file.h"

#include <errno.h>
#include <fcntl.h>
#include <limits.h>
#include <poll.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/stat.h>
#include <unistd.h>

enum { PORTION_BYTES = 1 << 20, UNIQUE_CHARACTERS = 6 /* that mkstemp wants to replace */ };

/* Where the system has no nameless files: a name of its own, taken away at once. */
static int open_unlinked(const char *folder)
{
    char path[PATH_MAX];
    int descriptor;
    int length = snprintf(path, sizeof path, "%s/firn-%0*d", folder, UNIQUE_CHARACTERS, 0);

    if (length < 0 || (size_t)length >= sizeof path) {
        errno = ENAMETOOLONG;
        return -1;
    }
    memset(path + length - UNIQUE_CHARACTERS, 'X', UNIQUE_CHARACTERS);
    descriptor = mkstemp(path);
    if (descriptor < 0)
        return -1;
    (void)fcntl(descriptor, F_SETFD, FD_CLOEXEC);
    (void)unlink(path);
    return descriptor;
}

static int open_temporary(const char *folder)
{
    int at = open(folder, O_RDONLY | O_DIRECTORY | O_CLOEXEC);
    int descriptor = at < 0 ? -1 : firn_store_file_nameless(at, false);

    if (at >= 0)
        close(at);
    return descriptor >= 0 ? descriptor : open_unlinked(folder);
}

enum firn_status firn_store_temporary(const char *folder, const struct firn_memory *memory, struct firn_store *store,
                                      struct firn_fault *fault)
{
    enum firn_status status;
    int descriptor;

    if (folder == NULL)
        folder = getenv("TMPDIR");
    if (folder == NULL || folder[0] == '\0')
        folder = "/tmp";
    descriptor = open_temporary(folder);
    if (descriptor < 0)
        return firn_fault_tell(fault, FIRN_CANNOT_CREATE, errno, 0, folder);
    status = firn_store_file_make(descriptor, true, folder, memory, store);
    if (status != FIRN_OK) {
        close(descriptor);
        return firn_fault_tell(fault, status, 0, 0, folder);
    }
    return FIRN_OK;
}

/* One portion. FIRN_OK with *got 0 at the end, FIRN_IO with errno, FIRN_STOPPED. */
static enum firn_status read_portion(int descriptor, const struct firn_store_watch *watch, uint8_t *bytes, size_t *got)
{
    for (;;) {
        ssize_t done;

        if (watch != NULL && watch->stop != NULL && watch->stop(watch->self)) {
            errno = 0;
            return FIRN_STOPPED;
        }
        done = read(descriptor, bytes, PORTION_BYTES);
        if (done >= 0) {
            *got = (size_t)done;
            return FIRN_OK;
        }
        if (errno == EAGAIN || errno == EWOULDBLOCK)
            firn_store_file_await(descriptor, POLLIN);
        else if (errno != EINTR)
            return FIRN_IO;
    }
}

static enum firn_status copy_in(int descriptor, const struct firn_store_watch *watch, const struct firn_memory *memory,
                                struct firn_store *store, struct firn_fault *fault)
{
    uint8_t *bytes = memory->get(memory->self, PORTION_BYTES);
    enum firn_status status = FIRN_OK;
    uint64_t at = 0;
    size_t got = 1;
    int why = 0;

    if (bytes == NULL)
        return firn_fault_tell(fault, FIRN_NO_MEMORY, 0, 0, "");
    while (status == FIRN_OK && got > 0) {
        status = read_portion(descriptor, watch, bytes, &got);
        if (status != FIRN_OK)
            (void)firn_fault_tell(fault, status, errno, at,
                                  status == FIRN_STOPPED ? "" : "the input that cannot be searched");
        else if ((status = store->write_at(store->self, at, bytes, got, &why)) != FIRN_OK)
            (void)firn_fault_tell(fault, status, why, at, "the temporary copy of the input");
        at += got;
        if (status == FIRN_OK && watch != NULL && watch->progress != NULL)
            watch->progress(watch->self, at, 0);
    }
    memory->put(memory->self, bytes);
    return status;
}

/* A file at its start can be searched as it is. */
static bool searchable(int descriptor)
{
    struct stat facts;

    return fstat(descriptor, &facts) == 0 && (S_ISREG(facts.st_mode) || S_ISBLK(facts.st_mode))
        && lseek(descriptor, 0, SEEK_CUR) == 0;
}

enum firn_status firn_store_spool(int descriptor, const struct firn_store_watch *watch,
                                  const struct firn_memory *memory, struct firn_store *store, struct firn_fault *fault)
{
    enum firn_status status;

    if (searchable(descriptor)) {
        int own = fcntl(descriptor, F_DUPFD_CLOEXEC, 0);

        if (own < 0)
            return firn_fault_tell(fault, FIRN_NO_INPUT, errno, 0, "");
        status = firn_store_file_make(own, false, "", memory, store);
        if (status != FIRN_OK)
            close(own);
        return status;
    }
    status = firn_store_temporary(NULL, memory, store, fault);
    if (status != FIRN_OK)
        return status;
    status = copy_in(descriptor, watch, memory, store, fault);
    if (status != FIRN_OK)
        store->close(store->self);
    return status;
}
