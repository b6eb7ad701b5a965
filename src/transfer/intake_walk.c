/* transfer/intake_walk.c - the way through a tree of folders */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "transfer/intake_walk.h"

#include "base/memory.h"

#include <dirent.h>
#include <errno.h>
#include <fcntl.h>
#include <stdlib.h>
#include <unistd.h>

struct frame {
    int descriptor;              /* -1: closed for now */
    dev_t device;
    ino_t inode;
    size_t mark;
    char *names;                 /* one behind the other, each ended by a NUL */
    char **order;                /* sorted */
    size_t count, next;
};

struct firn_intake_walk {
    const struct firn_memory *memory;
    struct frame *frames;
    size_t depth, capacity;
};

enum firn_status firn_intake_walk_make(const struct firn_memory *memory, struct firn_intake_walk **out)
{
    *out = firn_memory_get_zeroed(memory, 1, sizeof **out);
    if (*out == NULL)
        return FIRN_NO_MEMORY;
    (*out)->memory = memory;
    return FIRN_OK;
}

static void leave(struct firn_intake_walk *walk)
{
    struct frame *frame = &walk->frames[--walk->depth];

    if (frame->descriptor >= 0)
        close(frame->descriptor);
    walk->memory->put(walk->memory->self, frame->names);
    walk->memory->put(walk->memory->self, frame->order);
}

void firn_intake_walk_free(struct firn_intake_walk *walk)
{
    if (walk == NULL)
        return;
    while (walk->depth > 0)
        leave(walk);
    walk->memory->put(walk->memory->self, walk->frames);
    walk->memory->put(walk->memory->self, walk);
}

static int by_bytes(const void *one, const void *other)
{
    return strcmp(*(char *const *)one, *(char *const *)other);
}

static bool is_dot(const char *name)
{
    return name[0] == '.' && (name[1] == '\0' || (name[1] == '.' && name[2] == '\0'));
}

/* All names into frame->names. Returns FIRN_OK, FIRN_NO_MEMORY, or FIRN_IO with errno. */
static enum firn_status collect(struct firn_intake_walk *walk, struct frame *frame, DIR *folder, size_t *used)
{
    size_t capacity = 0;
    struct dirent *entry;

    while (errno = 0, (entry = readdir(folder)) != NULL) {
        size_t bytes = strlen(entry->d_name) + 1;
        void *names = frame->names;
        enum firn_status status;

        if (is_dot(entry->d_name))
            continue;
        status = firn_memory_grow(walk->memory, &names, &capacity, *used + bytes, 1);
        frame->names = names;
        if (status != FIRN_OK)
            return status;
        memcpy(frame->names + *used, entry->d_name, bytes);
        *used += bytes;
        frame->count++;
    }
    return errno == 0 ? FIRN_OK : FIRN_IO;
}

static enum firn_status read_names(struct firn_intake_walk *walk, struct frame *frame)
{
    int descriptor = fcntl(frame->descriptor, F_DUPFD_CLOEXEC, 0);      /* closedir closes what fdopendir is given */
    DIR *folder = descriptor < 0 ? NULL : fdopendir(descriptor);
    enum firn_status status = FIRN_IO;
    size_t used = 0;
    int error = errno;

    if (folder != NULL) {
        status = collect(walk, frame, folder, &used);
        error = errno;
        closedir(folder);
    } else if (descriptor >= 0) {
        close(descriptor);
    }
    errno = error;
    if (status != FIRN_OK || frame->count == 0)
        return status;
    frame->order = walk->memory->get(walk->memory->self, frame->count * sizeof *frame->order);
    if (frame->order == NULL)
        return FIRN_NO_MEMORY;
    for (size_t i = 0, at = 0; i < frame->count; i++) {
        frame->order[i] = frame->names + at;
        at += strlen(frame->names + at) + 1;
    }
    qsort(frame->order, frame->count, sizeof *frame->order, by_bytes);
    return FIRN_OK;
}

enum firn_status firn_intake_walk_into(struct firn_intake_walk *walk, int descriptor, const struct stat *facts,
                                       size_t mark, int *os_error)
{
    void *frames = walk->frames;
    enum firn_status status = firn_memory_grow(walk->memory, &frames, &walk->capacity, walk->depth + 1,
                                               sizeof *walk->frames);

    walk->frames = frames;
    if (status != FIRN_OK) {
        close(descriptor);
        return status;
    }
    walk->frames[walk->depth++] = (struct frame){
        .descriptor = descriptor, .device = facts->st_dev, .inode = facts->st_ino, .mark = mark
    };
    status = read_names(walk, &walk->frames[walk->depth - 1]);
    *os_error = errno;
    if (status != FIRN_OK) {
        leave(walk);
        return status;
    }
    if (walk->depth > FIRN_INTAKE_WALK_OPEN) {
        struct frame *far = &walk->frames[walk->depth - 1 - FIRN_INTAKE_WALK_OPEN];

        if (far->descriptor >= 0)
            close(far->descriptor);
        far->descriptor = -1;
    }
    return FIRN_OK;
}

/* Leaves the innermost folder; the one above gets its descriptor back if it can be had. */
static void step_out(struct firn_intake_walk *walk)
{
    struct frame *inner = &walk->frames[walk->depth - 1];
    struct frame *outer = walk->depth < 2 ? NULL : inner - 1;
    struct stat facts;

    if (outer != NULL && outer->descriptor < 0 && inner->descriptor >= 0) {
        outer->descriptor = openat(inner->descriptor, "..", O_RDONLY | O_DIRECTORY | O_CLOEXEC);
        if (outer->descriptor >= 0
            && (fstat(outer->descriptor, &facts) != 0 || facts.st_dev != outer->device
                || facts.st_ino != outer->inode)) {
            close(outer->descriptor);
            outer->descriptor = -1;
        }
    }
    leave(walk);
}

enum firn_status firn_intake_walk_next(struct firn_intake_walk *walk, int *folder, const char **name, size_t *mark)
{
    while (walk->depth > 0) {
        struct frame *frame = &walk->frames[walk->depth - 1];

        *mark = frame->mark;
        if (frame->next < frame->count) {
            if (frame->descriptor < 0) {
                frame->next = frame->count;
                return FIRN_CHANGED;
            }
            *folder = frame->descriptor;
            *name = frame->order[frame->next++];
            return FIRN_OK;
        }
        step_out(walk);
    }
    return FIRN_END;
}
