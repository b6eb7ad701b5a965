/* desk/lines.c - a file of JSON Lines that grows from run to run */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "desk/lines.h"

#include "care/append.h"
#include "desk/own_file.h"
#include "desk/trouble.h"

#include <stdlib.h>
#include <unistd.h>

/* Said once: a disk that is full would be said to be full for every container of a shelf. */
static void note(struct firn_lines *lines, enum firn_status status, const struct firn_fault *fault)
{
    if (status != FIRN_OK && lines->exit == FIRN_EXIT_SOUND)
        lines->exit = firn_trouble_tell(lines->view, lines->path, status, fault);
}

int firn_lines_open(struct firn_lines *lines, const char *path, struct firn_view *view)
{
    struct firn_fault fault = { 0 };
    enum firn_status status;

    *lines = (struct firn_lines){ .descriptor = -1, .path = path, .view = view };
    if (path == NULL)
        return FIRN_EXIT_SOUND;
    if (firn_own_file_check(view, path, "{", "a file of JSON Lines") != FIRN_EXIT_SOUND)
        return FIRN_EXIT_CANNOT_CREATE;
    status = firn_append_open(path, &lines->descriptor, &fault);
    return status == FIRN_OK ? FIRN_EXIT_SOUND : firn_trouble_tell(view, path, status, &fault);
}

FILE *firn_lines_begin(struct firn_lines *lines)
{
    FILE *line;

    if (lines->descriptor < 0)
        return NULL;
    line = open_memstream(&lines->bytes, &lines->count);
    if (line == NULL)
        note(lines, FIRN_NO_MEMORY, NULL);
    return line;
}

void firn_lines_end(struct firn_lines *lines, FILE *line)
{
    bool whole = ferror(line) == 0;
    struct firn_fault fault = { 0 };
    enum firn_status status = FIRN_NO_MEMORY;

    if (fclose(line) == 0 && whole)
        status = firn_append_line(lines->descriptor, lines->path, lines->bytes, lines->count, &fault);
    note(lines, status, &fault);
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
