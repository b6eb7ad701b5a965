/* desk/shelf.c - the containers in files and folders named on the command line */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "desk/shelf.h"

#include "desk/interrupt.h"

#include <dirent.h>
#include <errno.h>
#include <fcntl.h>
#include <limits.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/stat.h>
#include <unistd.h>

struct shelf {
    firn_shelf_teller *tell;
    void (*trouble)(void *self, const char *path, int os_error);
    void *self;
    bool all;      /* files of any kind */
};

static int by_bytes(const struct dirent **a, const struct dirent **b)
{
    return strcmp((*a)->d_name, (*b)->d_name);
}

static int keep(const struct dirent *entry)
{
    return strcmp(entry->d_name, ".") != 0 && strcmp(entry->d_name, "..") != 0;
}

static int looks_like_container(const char *path)
{
    static const char first_line[] = "FIRN CONTAINER, FORMAT ";      /* format-spec/title.md */
    size_t length = strlen(path);
    char start[sizeof first_line - 1];
    ssize_t got;
    int file;

    if (length > 5 && strcmp(path + length - 5, ".firn") == 0)
        return 1;
    file = open(path, O_RDONLY | O_NOFOLLOW | O_NONBLOCK | O_CLOEXEC);
    if (file < 0)
        return 0;
    got = read(file, start, sizeof start);
    close(file);
    return got == (ssize_t)sizeof start && memcmp(start, first_line, sizeof start) == 0;
}

static enum firn_status walk_folder(const struct shelf *shelf, const char *path);

static enum firn_status visit(const struct shelf *shelf, const char *folder, const char *name)
{
    size_t room = strlen(folder) + strlen(name) + 2;
    char *path = malloc(room);
    enum firn_status status = FIRN_OK;
    struct stat there;

    if (path == NULL)
        return FIRN_NO_MEMORY;
    snprintf(path, room, "%s%s%s", folder, folder[strlen(folder) - 1] == '/' ? "" : "/", name);
    if (lstat(path, &there) != 0)
        shelf->trouble(shelf->self, path, errno);
    else if (S_ISDIR(there.st_mode))
        status = walk_folder(shelf, path);
    else if (S_ISREG(there.st_mode) && (shelf->all || looks_like_container(path)))
        shelf->tell(shelf->self, path);
    free(path);
    return status;
}

/* The system's limit on names ends the depth: a path longer than PATH_MAX cannot be opened. */
static enum firn_status walk_folder(const struct shelf *shelf, const char *path)
{
    enum firn_status status = FIRN_OK;
    struct dirent **names;
    int count = scandir(path, &names, keep, by_bytes);

    if (count < 0) {
        shelf->trouble(shelf->self, path, errno);
        return FIRN_OK;
    }
    for (int i = 0; i < count; i++) {
        if (status == FIRN_OK && firn_interrupt_asked(NULL))
            status = FIRN_STOPPED;
        if (status == FIRN_OK)
            status = visit(shelf, path, names[i]->d_name);
        free(names[i]);
    }
    free(names);
    return status;
}

static enum firn_status walk(const struct shelf *shelf, const char *path)
{
    struct stat there;

    if (path[0] != '\0' && stat(path, &there) == 0 && S_ISDIR(there.st_mode))
        return walk_folder(shelf, path);
    shelf->tell(shelf->self, path);
    return FIRN_OK;
}

enum firn_status firn_shelf_walk(const char *path, firn_shelf_teller *tell,
                                 void (*trouble)(void *self, const char *path, int os_error), void *self)
{
    struct shelf shelf = { .tell = tell, .trouble = trouble, .self = self };

    return walk(&shelf, path);
}

enum firn_status firn_shelf_files(const char *path, firn_shelf_teller *tell,
                                  void (*trouble)(void *self, const char *path, int os_error), void *self)
{
    struct shelf shelf = { .tell = tell, .trouble = trouble, .self = self, .all = true };

    return walk(&shelf, path);
}
