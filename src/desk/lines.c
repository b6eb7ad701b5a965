/* desk/lines.c - a file of JSON Lines that grows from run to run */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "desk/lines.h"

#include "container/store_file.h"
#include "desk/trouble.h"

#include <errno.h>
#include <fcntl.h>
#include <stdlib.h>
#include <unistd.h>

static int tell(struct firn_lines *lines, enum firn_status status, int os_error)
{
    struct firn_fault fault = { .os_error = os_error };

    return firn_trouble_tell(lines->view, lines->path, status, &fault);
}

/* A file that was made just now has a name only once its folder is on the medium. */
static void sync_name(const struct firn_lines *lines)
{
    const char *name;
    int folder = firn_store_file_folder(lines->path, &name);

    if (folder < 0)
        return;
    (void)firn_store_file_sync_folder(folder, lines->descriptor);
    close(folder);
}

int firn_lines_open(struct firn_lines *lines, const char *path, struct firn_view *view)
{
    *lines = (struct firn_lines){ .descriptor = -1, .path = path, .view = view };
    if (path == NULL)
        return FIRN_EXIT_SOUND;
    lines->descriptor = open(path, O_RDWR | O_CREAT | O_APPEND | O_CLOEXEC, 0666);
    if (lines->descriptor < 0)
        return tell(lines, FIRN_CANNOT_CREATE, errno);
    sync_name(lines);
    return FIRN_EXIT_SOUND;
}

FILE *firn_lines_begin(struct firn_lines *lines)
{
    FILE *line;

    if (lines->descriptor < 0)
        return NULL;
    line = open_memstream(&lines->bytes, &lines->count);
    if (line == NULL && lines->exit == FIRN_EXIT_SOUND)
        lines->exit = tell(lines, FIRN_NO_MEMORY, 0);
    return line;
}

static bool ends_torn(int descriptor)
{
    off_t end = lseek(descriptor, 0, SEEK_END);
    char last;

    return end > 0 && pread(descriptor, &last, 1, end - 1) == 1 && last != '\n';
}

/* Returns 0 or an errno. A pipe or a device has nothing to sync. */
static int write_line(const struct firn_lines *lines)
{
    size_t given = 0;

    if (ends_torn(lines->descriptor) && write(lines->descriptor, "\n", 1) != 1)
        return errno;
    while (given < lines->count) {
        ssize_t done = write(lines->descriptor, lines->bytes + given, lines->count - given);

        if (done < 0 && errno == EINTR)
            continue;
        if (done < 0)
            return errno;
        given += (size_t)done;
    }
    return fsync(lines->descriptor) == 0 || errno == EINVAL || errno == EROFS ? 0 : errno;
}

void firn_lines_end(struct firn_lines *lines, FILE *line)
{
    bool whole = fputc('\n', line) != EOF && ferror(line) == 0;
    int error;

    if (fclose(line) != 0)
        whole = false;
    error = whole ? write_line(lines) : ENOMEM;
    if (error != 0 && lines->exit == FIRN_EXIT_SOUND)
        lines->exit = tell(lines, FIRN_IO, error);
    free(lines->bytes);
    lines->bytes = NULL;
}

int firn_lines_close(struct firn_lines *lines, int exit)
{
    if (lines->descriptor >= 0)
        close(lines->descriptor);
    lines->descriptor = -1;
    return exit == FIRN_EXIT_SOUND || exit == FIRN_EXIT_SAFE ? (lines->exit != 0 ? lines->exit : exit) : exit;
}
