/* desk/own_file.c - what a report must not be written over */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "desk/own_file.h"

#include "desk/trouble.h"

#include <fcntl.h>
#include <string.h>
#include <sys/stat.h>
#include <unistd.h>

enum { FIRST_BYTES_MAX = 32 };

/* Trouble of any kind is left to whoever opens the file for writing, and tells more about it. */
static bool begins_otherwise(const char *path, const char *first)
{
    size_t bytes = strlen(first);
    char found[FIRST_BYTES_MAX];
    struct stat facts;
    ssize_t got;
    int descriptor;

    if (stat(path, &facts) != 0 || !S_ISREG(facts.st_mode) || facts.st_size == 0)
        return false;
    descriptor = open(path, O_RDONLY | O_CLOEXEC);
    if (descriptor < 0)
        return false;
    got = pread(descriptor, found, bytes, 0);
    close(descriptor);
    return got >= 0 && ((size_t)got < bytes || memcmp(found, first, bytes) != 0);
}

int firn_own_file_check(struct firn_view *view, const char *path, const char *first, const char *kind)
{
    char words[160];
    struct firn_text text;

    if (path == NULL || !begins_otherwise(path, first))
        return FIRN_EXIT_SOUND;
    firn_text_start(&text, words, sizeof words);
    firn_text_add(&text, "is there and is not %s; left as it is: name another file for that", kind);
    firn_view_finding(view, "exists", path, words);
    return FIRN_EXIT_CANNOT_CREATE;
}

bool firn_own_file_same(const char *source, const char *output)
{
    struct stat from, to;

    return stat(source, &from) == 0 && lstat(output, &to) == 0 && from.st_dev == to.st_dev && from.st_ino == to.st_ino;
}
