/* care/append.c - a file of lines that grows from run to run */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "care/append.h"

#include "base/fault.h"
#include "container/store_file.h"

#include <errno.h>
#include <fcntl.h>
#include <stdbool.h>
#include <unistd.h>

enum firn_status firn_append_open(const char *path, int *descriptor, struct firn_fault *fault)
{
    const char *name;
    int folder;

    *descriptor = open(path, O_RDWR | O_CREAT | O_APPEND | O_CLOEXEC, 0666);
    if (*descriptor < 0)
        return firn_fault_tell(fault, FIRN_CANNOT_CREATE, errno, 0, path);
    folder = firn_store_file_folder(path, &name);      /* a file that is new has its name once its folder is synced */
    if (folder >= 0) {
        (void)firn_store_file_sync_folder(folder, *descriptor);
        close(folder);
    }
    return FIRN_OK;
}

static bool ends_torn(int descriptor)
{
    off_t end = lseek(descriptor, 0, SEEK_END);
    char last;

    return end > 0 && pread(descriptor, &last, 1, end - 1) == 1 && last != '\n';
}

/* Returns 0 or an errno. */
static int write_all(int descriptor, const char *bytes, size_t count)
{
    while (count > 0) {
        ssize_t done = write(descriptor, bytes, count);

        if (done < 0 && errno == EINTR)
            continue;
        if (done < 0)
            return errno;
        bytes += done;
        count -= (size_t)done;
    }
    return 0;
}

enum firn_status firn_append_line(int descriptor, const char *path, const char *bytes, size_t count,
                                  struct firn_fault *fault)
{
    int error = ends_torn(descriptor) ? write_all(descriptor, "\n", 1) : 0;

    if (error == 0)
        error = write_all(descriptor, bytes, count);
    if (error == 0 && fsync(descriptor) != 0 && errno != EINVAL && errno != EROFS)      /* a pipe has nothing to sync */
        error = errno;
    return error == 0 ? FIRN_OK : firn_fault_tell(fault, FIRN_IO, error, 0, path);
}
