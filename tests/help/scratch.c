/* tests/help/scratch.c - a folder of a test's own, and what stands in it */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "help/scratch.h"

#include <dirent.h>
#include <fcntl.h>
#include <ftw.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/stat.h>
#include <sys/wait.h>
#include <unistd.h>

static char folder[SCRATCH_PATH_ROOM / 2];

/* A test that cannot set its stage has nothing to say. */
static void need(bool fine, const char *what)
{
    if (!fine) {
        perror(what);
        abort();
    }
}

void scratch_make(void)
{
    const char *above = getenv("TMPDIR");

    (void)snprintf(folder, sizeof folder, "%s/firn-test-000000", above != NULL && above[0] != '\0' ? above : "/tmp");
    memset(folder + strlen(folder) - 6, 'X', 6);      /* what mkdtemp replaces */
    need(mkdtemp(folder) != NULL, folder);
    need(chmod(folder, 0777) == 0, folder);      /* for children without root's rights */
}

static int take_away(const char *path, const struct stat *facts, int kind, struct FTW *place)
{
    (void)facts, (void)kind, (void)place;
    return remove(path);
}

void scratch_remove(void)
{
    (void)nftw(folder, take_away, 8, FTW_DEPTH | FTW_PHYS);
}

const char *scratch_path(const char *name)
{
    static char paths[8][SCRATCH_PATH_ROOM];
    static unsigned next;
    char *path = paths[next++ % 8];

    (void)snprintf(path, SCRATCH_PATH_ROOM, "%s/%s", folder, name);
    return path;
}

void scratch_write(const char *name, const void *bytes, size_t count, mode_t mode)
{
    const char *path = scratch_path(name);
    int descriptor = open(path, O_WRONLY | O_CREAT | O_TRUNC, 0600);
    size_t given = 0;

    need(descriptor >= 0, path);
    while (given < count) {
        ssize_t done = write(descriptor, (const char *)bytes + given, count - given);

        need(done > 0, path);
        given += (size_t)done;
    }
    need(fchmod(descriptor, mode) == 0 && close(descriptor) == 0, path);
}

uint8_t *scratch_read(const char *name, size_t *count)
{
    int descriptor = open(scratch_path(name), O_RDONLY);
    struct stat facts;
    uint8_t *bytes;
    size_t got = 0;

    *count = 0;
    if (descriptor < 0)
        return NULL;
    need(fstat(descriptor, &facts) == 0, name);
    bytes = malloc((size_t)facts.st_size + 1);
    need(bytes != NULL, name);
    while (got < (size_t)facts.st_size) {
        ssize_t done = read(descriptor, bytes + got, (size_t)facts.st_size - got);

        need(done > 0, name);
        got += (size_t)done;
    }
    close(descriptor);
    *count = got;
    return bytes;
}

unsigned scratch_entries(void)
{
    DIR *list = opendir(folder);
    unsigned entries = 0;

    need(list != NULL, folder);
    while (readdir(list) != NULL)
        entries++;
    closedir(list);
    return entries - 2;      /* "." and ".." */
}

int scratch_wait(pid_t child)
{
    int outcome;

    need(waitpid(child, &outcome, 0) == child, "waitpid");
    return WIFEXITED(outcome) ? WEXITSTATUS(outcome) : -1;
}

int scratch_in_child(int (*deed)(void *self), void *self)
{
    pid_t child;

    fflush(NULL);
    child = fork();
    need(child >= 0, "fork");
    if (child == 0)
        _exit(deed(self));
    return scratch_wait(child);
}

bool scratch_be_nobody(void)
{
    enum { NOBODY = 65534 };

    if (geteuid() == 0)
        return setgid(NOBODY) == 0 && setuid(NOBODY) == 0;
    return true;
}
