/* transfer/outlet_place.c - finding the folder an item belongs in */
/* SPDX-License-Identifier: BSD-2-Clause */
#define _GNU_SOURCE     /* O_PATH */
#include "transfer/outlet_place.h"

#include <errno.h>
#include <fcntl.h>
#include <string.h>
#include <sys/stat.h>
#include <unistd.h>

void firn_outlet_place_start(struct firn_outlet_place *place, int root)
{
    place->root = root;
    place->self = NULL;
    place->made = NULL;
    place->path[0] = '\0';
    place->depth = 0;
}

static void close_last(struct firn_outlet_place *place)
{
    close(place->open[--place->depth].descriptor);
}

/* Makes room: the way back from far below goes through the lower folders first, then once more from the root. */
static void close_upper_half(struct firn_outlet_place *place)
{
    enum { HALF = FIRN_OUTLET_PLACE_OPEN / 2 };

    for (unsigned i = 0; i < HALF; i++)
        close(place->open[i].descriptor);
    memmove(place->open, place->open + HALF, (place->depth - HALF) * sizeof place->open[0]);
    place->depth -= HALF;
}

void firn_outlet_place_end(struct firn_outlet_place *place)
{
    while (place->depth > 0)
        close_last(place);
}

/* How far name and the open folders go together. */
static size_t keep_common(struct firn_outlet_place *place, const char *name)
{
    while (place->depth > 0) {
        size_t bytes = place->open[place->depth - 1].path_bytes;

        if (strncmp(name, place->path, bytes) == 0 && name[bytes] == '/')
            return bytes + 1;
        close_last(place);
    }
    return 0;
}

/* Opens one more folder: path[0 .. bytes), whose last component begins at `from`. */
static enum firn_status step(struct firn_outlet_place *place, size_t from, size_t bytes, bool make, int *os_error)
{
    int above = place->depth == 0 ? place->root : place->open[place->depth - 1].descriptor;
    const char *component = place->path + from;
    enum firn_status status;
    int descriptor = openat(above, component, O_PATH | O_DIRECTORY | O_NOFOLLOW | O_CLOEXEC);

    if (descriptor < 0 && errno == ENOENT && make) {
        if (mkdirat(above, component, S_IRWXU | S_IRWXG | S_IRWXO) != 0) {
            *os_error = errno;
            return FIRN_CANNOT_CREATE;
        }
        status = place->made == NULL ? FIRN_OK : place->made(place->self, place->path, bytes);
        if (status != FIRN_OK)
            return status;
        descriptor = openat(above, component, O_PATH | O_DIRECTORY | O_NOFOLLOW | O_CLOEXEC);
    }
    if (descriptor < 0) {
        *os_error = errno;
        return errno == ENOTDIR || errno == ELOOP ? FIRN_EXISTS
               : errno == ENOENT && !make         ? FIRN_NO_INPUT
                                                  : FIRN_CANNOT_CREATE;
    }
    if (place->depth == FIRN_OUTLET_PLACE_OPEN)
        close_upper_half(place);
    place->open[place->depth].descriptor = descriptor;
    place->open[place->depth++].path_bytes = bytes;
    return FIRN_OK;
}

enum firn_status firn_outlet_place_find(struct firn_outlet_place *place, const char *name, bool make, int *folder,
                                        const char **last, int *os_error)
{
    size_t at = keep_common(place, name);

    for (;;) {
        size_t bytes = strcspn(name + at, "/");
        enum firn_status status;

        if (name[at + bytes] == '\0')
            break;
        memcpy(place->path + at, name + at, bytes);
        if (at > 0)
            place->path[at - 1] = '/';
        place->path[at + bytes] = '\0';
        status = step(place, at, at + bytes, make, os_error);
        if (status != FIRN_OK)
            return status;
        at += bytes + 1;
    }
    *folder = place->depth == 0 ? place->root : place->open[place->depth - 1].descriptor;
    *last = name + at;
    return FIRN_OK;
}
