/* container/store_beside.c - a file beside a container that belongs to it */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "container/store_beside.h"

#include "base/fault.h"
#include "container/store_file.h"

#include <errno.h>
#include <fcntl.h>
#include <limits.h>
#include <stdlib.h>
#include <string.h>
#include <sys/stat.h>
#include <unistd.h>

enum firn_status firn_store_beside_path(const char *path, const char *suffix, const struct firn_memory *memory,
                                        char **beside, struct firn_fault *fault)
{
    size_t suffix_bytes = strlen(suffix) + 1;
    char *whole = memory->get(memory->self, PATH_MAX + suffix_bytes);
    enum firn_status status = FIRN_OK;
    struct stat facts;

    *beside = NULL;
    if (whole == NULL)
        return firn_fault_tell(fault, FIRN_NO_MEMORY, 0, 0, path);
    if (realpath(path, whole) == NULL || stat(whole, &facts) != 0)
        status = firn_fault_tell(fault, FIRN_NO_INPUT, errno, 0, path);
    else if (!S_ISREG(facts.st_mode))
        status = firn_fault_tell(fault, FIRN_CANNOT_CREATE, ENOTSUP, 0, path);
    if (status != FIRN_OK) {
        memory->put(memory->self, whole);
        return status;
    }
    memcpy(whole + strlen(whole), suffix, suffix_bytes);
    *beside = whole;
    return FIRN_OK;
}

enum firn_status firn_store_beside_make(const char *beside, const struct firn_memory *memory, struct firn_store *store,
                                        struct firn_fault *fault)
{
    int descriptor = open(beside, O_RDWR | O_CREAT | O_EXCL | O_NOFOLLOW | O_CLOEXEC, 0600);
    enum firn_status status;

    if (descriptor < 0)
        return firn_fault_tell(fault, errno == EEXIST ? FIRN_EXISTS : FIRN_CANNOT_CREATE, errno, 0, beside);
    status = firn_store_file_make(descriptor, true, beside, memory, store);
    if (status != FIRN_OK) {
        close(descriptor);
        (void)unlink(beside);
        return firn_fault_tell(fault, status, 0, 0, beside);
    }
    return FIRN_OK;
}

enum firn_status firn_store_beside_settle(const char *beside, struct firn_fault *fault)
{
    const char *name;
    int folder = firn_store_file_folder(beside, &name);
    int why = folder < 0 || firn_store_file_sync_folder(folder, -1) != 0 ? errno : 0;

    if (folder >= 0)
        close(folder);
    return why == 0 ? FIRN_OK : firn_fault_tell(fault, FIRN_IO, why, 0, beside);
}

/* Whether a file is a plain one, with this name only, that nobody wrote but somebody who may be believed. */
static bool trusted(int descriptor, const struct firn_store *container)
{
    int other = firn_store_file_descriptor(container);
    struct stat facts, its;

    if (fstat(descriptor, &facts) != 0 || !S_ISREG(facts.st_mode) || facts.st_nlink != 1
        || (facts.st_mode & (S_IWGRP | S_IWOTH)) != 0)
        return false;
    if (facts.st_uid == geteuid() || facts.st_uid == 0)
        return true;
    return other >= 0 && fstat(other, &its) == 0 && facts.st_uid == its.st_uid;
}

enum firn_status firn_store_beside_open(const char *beside, const struct firn_store *container,
                                        const struct firn_memory *memory, struct firn_store *store,
                                        struct firn_fault *fault)
{
    /* O_NONBLOCK, so that a fifo in its place does not make us wait */
    int descriptor = open(beside, O_RDONLY | O_NOFOLLOW | O_NONBLOCK | O_CLOEXEC | O_NOCTTY);
    enum firn_status status;

    if (descriptor < 0 && errno == ENOENT)
        return FIRN_END;
    if (descriptor < 0)
        return firn_fault_tell(fault, errno == ELOOP || errno == ENXIO ? FIRN_BAD_DATA : FIRN_IO, errno, 0, beside);
    if (!trusted(descriptor, container))
        status = firn_fault_tell(fault, FIRN_BAD_DATA, 0, 0, beside);
    else if ((status = firn_store_file_make(descriptor, false, beside, memory, store)) == FIRN_OK)
        return FIRN_OK;
    else
        (void)firn_fault_tell(fault, status, 0, 0, beside);
    close(descriptor);
    return status;
}
