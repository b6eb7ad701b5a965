/* container/store.c - files and devices as stores: opened, read, written, synced, locked */
/* SPDX-License-Identifier: BSD-2-Clause */
#define _GNU_SOURCE     /* MADV_POPULATE_READ */
#include "firn/store.h"

#include "base/fault.h"
#include "container/store_file.h"

#include <errno.h>
#include <fcntl.h>
#include <poll.h>
#include <string.h>
#include <sys/file.h>
#include <sys/mman.h>
#include <sys/stat.h>
#include <unistd.h>

enum { CALL_BYTES_MAX = 1 << 30 };      /* one system call moves no more than this: less than any limit of theirs */

struct file {
    const struct firn_memory *memory;
    int descriptor;
    bool writable;
    void *lent;              /* a mapping, or NULL */
    size_t lent_bytes;
    char path[];
};

/* Whether bytes[at .. at + count) can be told to the system at all. */
static bool in_reach(uint64_t at, size_t count)
{
    return at <= INT64_MAX && count <= INT64_MAX - at;
}

static enum firn_status file_read_at(void *self, uint64_t at, void *bytes, size_t count, size_t *got, int *os_error)
{
    struct file *file = self;

    *got = 0;
    *os_error = 0;
    if (!in_reach(at, count))
        return FIRN_OK;
    while (*got < count) {
        size_t wanted = count - *got < CALL_BYTES_MAX ? count - *got : CALL_BYTES_MAX;
        ssize_t done = pread(file->descriptor, (char *)bytes + *got, wanted, (off_t)(at + *got));

        if (done == 0)
            break;
        if (done > 0) {
            *got += (size_t)done;
        } else if (errno != EINTR) {
            *os_error = errno;
            return FIRN_IO;
        }
    }
    return FIRN_OK;
}

static enum firn_status write_failed(int error, int *os_error)
{
    *os_error = error;
    return error == EROFS || error == EPERM ? FIRN_READ_ONLY : FIRN_IO;
}

static enum firn_status file_write_at(void *self, uint64_t at, const void *bytes, size_t count, int *os_error)
{
    struct file *file = self;
    size_t given = 0;

    *os_error = 0;
    if (!file->writable)
        return write_failed(EROFS, os_error);
    if (!in_reach(at, count))
        return write_failed(EFBIG, os_error);
    while (given < count) {
        size_t wanted = count - given < CALL_BYTES_MAX ? count - given : CALL_BYTES_MAX;
        ssize_t done = pwrite(file->descriptor, (const char *)bytes + given, wanted, (off_t)(at + given));

        if (done > 0)
            given += (size_t)done;
        else if (done == 0)
            return write_failed(ENOSPC, os_error);      /* the end of a device */
        else if (errno != EINTR)
            return write_failed(errno, os_error);
    }
    return FIRN_OK;
}

static enum firn_status file_size(void *self, uint64_t *bytes, int *os_error)
{
    struct file *file = self;
    off_t end = lseek(file->descriptor, 0, SEEK_END);      /* of a device, too, where stat gives 0 */

    *os_error = end < 0 ? errno : 0;
    *bytes = end < 0 ? 0 : (uint64_t)end;
    return end < 0 ? FIRN_IO : FIRN_OK;
}

static enum firn_status file_resize(void *self, uint64_t bytes, int *os_error)
{
    struct file *file = self;

    *os_error = 0;
    if (!file->writable)
        return write_failed(EROFS, os_error);
    if (!in_reach(bytes, 0))
        return write_failed(EFBIG, os_error);
    while (ftruncate(file->descriptor, (off_t)bytes) != 0)
        if (errno != EINTR)
            return write_failed(errno, os_error);
    return FIRN_OK;
}

static enum firn_status file_sync(void *self, int *os_error)
{
    struct file *file = self;

    *os_error = 0;
    while (fsync(file->descriptor) != 0)
        if (errno != EINTR) {
            *os_error = errno;
            return FIRN_IO;
        }
    return FIRN_OK;
}

static void file_forget(void *self, uint64_t at, uint64_t bytes)
{
    struct file *file = self;

    if (bytes > 0 && at <= INT64_MAX && bytes <= INT64_MAX - at)
        (void)posix_fadvise(file->descriptor, (off_t)at, (off_t)bytes, POSIX_FADV_DONTNEED);
}

static void take_back(struct file *file)
{
    if (file->lent != NULL)
        (void)munmap(file->lent, file->lent_bytes);
    file->lent = NULL;
}

/*
 * A private mapping: writing on it makes a copy of the page. Populating first turns a sector that cannot be read into
 * an error here instead of a signal later.
 */
static enum firn_status file_lend(void *self, uint64_t at, size_t count, uint8_t **bytes)
{
#ifdef MADV_POPULATE_READ
    struct file *file = self;
    size_t inside = (size_t)(at % 4096);
    struct stat facts;
    void *mapping;

    take_back(file);
    if (!in_reach(at, count) || count == 0 || fstat(file->descriptor, &facts) != 0 || !S_ISREG(facts.st_mode) ||
        at + count > (uint64_t)facts.st_size)
        return FIRN_END;
    mapping = mmap(NULL, count + inside, PROT_READ | PROT_WRITE, MAP_PRIVATE, file->descriptor, (off_t)(at - inside));
    if (mapping == MAP_FAILED)
        return FIRN_NO_MEMORY;
    file->lent = mapping;
    file->lent_bytes = count + inside;
    if (madvise(mapping, file->lent_bytes, MADV_POPULATE_READ) != 0) {
        take_back(file);
        return FIRN_IO;
    }
    *bytes = (uint8_t *)mapping + inside;
    return FIRN_OK;
#else
    (void)self, (void)at, (void)count, (void)bytes;
    return FIRN_END;
#endif
}

static void file_close(void *self)
{
    struct file *file = self;

    take_back(file);
    close(file->descriptor);
    file->memory->put(file->memory->self, file);
}

enum firn_status firn_store_file_make(int descriptor, bool writable, const char *path, const struct firn_memory *memory,
                                      struct firn_store *store)
{
    size_t path_bytes = strlen(path) + 1;
    struct file *file = memory->get(memory->self, sizeof *file + path_bytes);

    if (file == NULL)
        return FIRN_NO_MEMORY;
    *file = (struct file){ .memory = memory, .descriptor = descriptor, .writable = writable };
    memcpy(file->path, path, path_bytes);
    *store = (struct firn_store){ file, file_read_at, file_write_at, file_size, file_resize, file_sync, file_forget,
                                  file_close, file_lend };
    return FIRN_OK;
}

int firn_store_file_descriptor(const struct firn_store *store)
{
    return store->close == file_close ? ((const struct file *)store->self)->descriptor : -1;
}

void firn_store_file_await(int descriptor, short events)
{
    struct pollfd one = { .fd = descriptor, .events = events };

    (void)poll(&one, 1, -1);
}

/* Why a thing that is no file or device cannot be a store; 0 when it can. */
static int unfit(const struct stat *facts)
{
    if (S_ISREG(facts->st_mode) || S_ISBLK(facts->st_mode))
        return 0;
    return S_ISDIR(facts->st_mode) ? EISDIR : ESPIPE;
}

/* Opens for writing; tells a medium that cannot be written from a file that cannot be had. */
static enum firn_status open_to_mend(const char *path, int *descriptor)
{
    int why, probe;

    *descriptor = open(path, O_RDWR | O_CLOEXEC | O_NOCTTY);
    if (*descriptor >= 0)
        return FIRN_OK;
    why = errno;
    probe = open(path, O_RDONLY | O_CLOEXEC | O_NOCTTY);
    if (probe >= 0)
        close(probe);
    errno = why;
    return probe >= 0 ? FIRN_READ_ONLY : FIRN_NO_INPUT;
}

enum firn_status firn_store_open(const char *path, enum firn_store_use use, const struct firn_memory *memory,
                                 struct firn_store *store, struct firn_fault *fault)
{
    enum firn_status status = FIRN_OK;
    struct stat facts;
    int descriptor;

    /* Asked before opening, because opening a fifo waits for its other end. */
    if (stat(path, &facts) != 0)
        return firn_fault_tell(fault, FIRN_NO_INPUT, errno, 0, path);
    if (unfit(&facts) != 0)
        return firn_fault_tell(fault, FIRN_NO_INPUT, unfit(&facts), 0, path);
    if (use == FIRN_STORE_MEND)
        status = open_to_mend(path, &descriptor);
    else if ((descriptor = open(path, O_RDONLY | O_CLOEXEC | O_NOCTTY)) < 0)
        status = FIRN_NO_INPUT;
    if (status != FIRN_OK)
        return firn_fault_tell(fault, status, errno, 0, path);

    (void)posix_fadvise(descriptor, 0, 0, POSIX_FADV_SEQUENTIAL);
    status = firn_store_file_make(descriptor, use == FIRN_STORE_MEND, path, memory, store);
    if (status != FIRN_OK) {
        close(descriptor);
        return firn_fault_tell(fault, status, 0, 0, path);
    }
    return FIRN_OK;
}

enum firn_status firn_store_lock(struct firn_store *store, struct firn_fault *fault)
{
    int descriptor = firn_store_file_descriptor(store);

    if (descriptor < 0)
        return FIRN_OK;
    while (flock(descriptor, LOCK_EX | LOCK_NB) != 0)
        if (errno != EINTR)
            return firn_fault_tell(fault, errno == EWOULDBLOCK ? FIRN_BUSY : FIRN_IO, errno, 0,
                                   ((const struct file *)store->self)->path);
    return FIRN_OK;
}
