/* container/store_folder.c - folders: opened to name things in, synced, rid of a file, host to nameless files */
/* SPDX-License-Identifier: BSD-2-Clause */
#define _GNU_SOURCE     /* O_PATH, O_TMPFILE, syncfs */
#include "container/store_file.h"

#include "base/fault.h"

#include <errno.h>
#include <fcntl.h>
#include <limits.h>
#include <string.h>
#include <unistd.h>

int firn_store_file_folder(const char *path, const char **name)
{
    const char *slash = strrchr(path, '/');
    char folder[PATH_MAX] = ".";
    size_t length = slash == NULL ? 1 : slash == path ? 1 : (size_t)(slash - path);
    int descriptor;

    *name = slash == NULL ? path : slash + 1;
    if (length >= sizeof folder) {
        errno = ENAMETOOLONG;
        return -1;
    }
    if (slash != NULL) {
        memcpy(folder, path, length);
        folder[length] = '\0';
    }
    descriptor = open(folder, O_RDONLY | O_DIRECTORY | O_CLOEXEC);
    if (descriptor < 0 && errno == EACCES)
        descriptor = open(folder, O_PATH | O_DIRECTORY | O_CLOEXEC);
    return descriptor;
}

int firn_store_file_sync_folder(int folder, int file)
{
    for (;;) {
        if (fsync(folder) == 0)
            return 0;
        if (errno == EBADF || errno == EINVAL || errno == ENOTSUP)
            return file >= 0 ? syncfs(file) : (sync(), 0);
        if (errno != EINTR)
            return -1;
    }
}

int firn_store_file_nameless(int folder, bool linkable)
{
    return openat(folder, ".", O_TMPFILE | O_RDWR | O_CLOEXEC | (linkable ? 0 : O_EXCL), linkable ? 0666 : 0600);
}

enum firn_status firn_store_remove(const char *path, struct firn_fault *fault)
{
    const char *name;
    int folder = firn_store_file_folder(path, &name);
    int why = 0;

    if (folder < 0)
        return errno == ENOENT ? FIRN_OK : firn_fault_tell(fault, FIRN_IO, errno, 0, path);
    if (unlinkat(folder, name, 0) != 0)
        why = errno == ENOENT ? 0 : errno;
    else if (firn_store_file_sync_folder(folder, -1) != 0)
        why = errno;
    close(folder);
    return why == 0 ? FIRN_OK : firn_fault_tell(fault, FIRN_IO, why, 0, path);
}
