/* container/store_stage.c - files that appear under their name only when they are whole */
/* SPDX-License-Identifier: BSD-2-Clause */
#define _GNU_SOURCE     /* renameat2 */
#include "firn/store.h"

#include "base/fault.h"
#include "container/store_file.h"

#include <errno.h>
#include <fcntl.h>
#include <limits.h>
#include <stdio.h>
#include <string.h>
#include <sys/stat.h>
#include <unistd.h>

enum { TEMPORARY_TRIES = 1000, TEMPORARY_STEM_BYTES = 200 };      /* with its ending it stays below NAME_MAX */

struct firn_store_stage {
    const struct firn_memory *memory;
    struct firn_store store;
    int folder;
    bool replace;
    char temporary[NAME_MAX + 1];      /* "" while the file has no temporary name */
    const char *name;                  /* in path, within folder */
    char path[];
};

static enum firn_status tell(const struct firn_store_stage *stage, struct firn_fault *fault, enum firn_status status,
                             int why)
{
    return firn_fault_tell(fault, status, why, 0, stage->path);
}

static void name_temporary(struct firn_store_stage *stage, unsigned number)
{
    int used = snprintf(stage->temporary, sizeof stage->temporary, ".%.*s.firn-stage-%ld", TEMPORARY_STEM_BYTES,
                        stage->name, (long)getpid());

    if (number > 0)
        (void)snprintf(stage->temporary + used, sizeof stage->temporary - (size_t)used, "-%u", number);
}

/* The name under /proc by which a nameless file can be linked, by those without special rights too. */
static void name_descriptor(int descriptor, char *path, size_t room)
{
    (void)snprintf(path, room, "/proc/self/fd/%d", descriptor);
}

static int open_nameless(const struct firn_store_stage *stage)
{
    char link[64];
    int descriptor = firn_store_file_nameless(stage->folder, true);

    if (descriptor < 0)
        return -1;
    name_descriptor(descriptor, link, sizeof link);
    if (faccessat(AT_FDCWD, link, F_OK, 0) == 0)
        return descriptor;
    close(descriptor);      /* no /proc here: it could never get its name */
    return -1;
}

static int open_named(struct firn_store_stage *stage)
{
    int descriptor = -1;

    for (unsigned number = 0; number < TEMPORARY_TRIES && descriptor < 0; number++) {
        name_temporary(stage, number);
        descriptor = openat(stage->folder, stage->temporary, O_RDWR | O_CREAT | O_EXCL | O_NOFOLLOW | O_CLOEXEC, 0666);
        if (descriptor < 0 && errno != EEXIST)
            break;
    }
    if (descriptor < 0)
        stage->temporary[0] = '\0';
    return descriptor;
}

/* Whether the place that the file shall have one day is free, or may be taken over. */
static enum firn_status check_place(const struct firn_store_stage *stage, struct firn_fault *fault)
{
    struct stat facts;

    if (stage->name[0] == '\0')
        return tell(stage, fault, FIRN_CANNOT_CREATE, EISDIR);
    if (fstatat(stage->folder, stage->name, &facts, AT_SYMLINK_NOFOLLOW) != 0)
        return errno == ENOENT ? FIRN_OK : tell(stage, fault, FIRN_CANNOT_CREATE, errno);
    if (!stage->replace)
        return tell(stage, fault, FIRN_EXISTS, EEXIST);
    /* A rename would put a file in the place of a device just as readily. */
    if (S_ISREG(facts.st_mode) || S_ISLNK(facts.st_mode))
        return FIRN_OK;
    return tell(stage, fault, FIRN_CANNOT_CREATE, S_ISDIR(facts.st_mode) ? EISDIR : EEXIST);
}

enum firn_status firn_store_stage_open(const char *path, bool replace, const struct firn_memory *memory,
                                       struct firn_store_stage **out, struct firn_fault *fault)
{
    size_t path_bytes = strlen(path) + 1;
    struct firn_store_stage *stage = memory->get(memory->self, sizeof *stage + path_bytes);
    enum firn_status status;
    int descriptor;

    *out = NULL;
    if (stage == NULL)
        return firn_fault_tell(fault, FIRN_NO_MEMORY, 0, 0, path);
    *stage = (struct firn_store_stage){ .memory = memory, .replace = replace };
    memcpy(stage->path, path, path_bytes);
    stage->folder = firn_store_file_folder(stage->path, &stage->name);
    status = stage->folder < 0 ? tell(stage, fault, FIRN_CANNOT_CREATE, errno) : check_place(stage, fault);
    if (status != FIRN_OK)
        goto fail;
    descriptor = open_nameless(stage);
    if (descriptor < 0)
        descriptor = open_named(stage);
    if (descriptor < 0) {
        status = tell(stage, fault, FIRN_CANNOT_CREATE, errno);
        goto fail;
    }
    status = firn_store_file_make(descriptor, true, path, memory, &stage->store);
    if (status != FIRN_OK) {
        close(descriptor);
        (void)tell(stage, fault, status, 0);
        goto fail;
    }
    *out = stage;
    return FIRN_OK;

fail:
    firn_store_stage_close(stage);
    return status;
}

struct firn_store *firn_store_stage_store(struct firn_store_stage *stage)
{
    return &stage->store;
}

int firn_store_stage_descriptor(struct firn_store_stage *stage)
{
    return firn_store_file_descriptor(&stage->store);
}

/* Links the nameless file as `name`. Returns 0 or an errno. */
static int link_nameless(const struct firn_store_stage *stage, const char *name)
{
    int descriptor = firn_store_file_descriptor(&stage->store);
    char link[64];

    name_descriptor(descriptor, link, sizeof link);
    if (linkat(AT_FDCWD, link, stage->folder, name, AT_SYMLINK_FOLLOW) == 0)
        return 0;
    return errno;
}

/* Gives the file its name if that is free. Returns 0 or an errno: EEXIST when it is not. */
static int settle(struct firn_store_stage *stage)
{
    if (stage->temporary[0] == '\0')
        return link_nameless(stage, stage->name);
    if (renameat2(stage->folder, stage->temporary, stage->folder, stage->name, RENAME_NOREPLACE) != 0) {
        if (errno != EINVAL && errno != ENOSYS)
            return errno;
        if (linkat(stage->folder, stage->temporary, stage->folder, stage->name, 0) != 0)
            return errno;
        (void)unlinkat(stage->folder, stage->temporary, 0);
    }
    stage->temporary[0] = '\0';
    return 0;
}

/* Gives the file its name, whoever has it now. Returns 0 or an errno. */
static int take_over(struct firn_store_stage *stage)
{
    int why = stage->temporary[0] == '\0' ? EEXIST : 0;

    for (unsigned number = 0; why == EEXIST && number < TEMPORARY_TRIES; number++) {
        name_temporary(stage, number);
        why = link_nameless(stage, stage->temporary);
    }
    if (why != 0) {
        stage->temporary[0] = '\0';
        return why;
    }
    if (renameat(stage->folder, stage->temporary, stage->folder, stage->name) != 0)
        return errno;
    stage->temporary[0] = '\0';
    return 0;
}

enum firn_status firn_store_stage_keep(struct firn_store_stage *stage, struct firn_fault *fault)
{
    enum firn_status status;
    int why;

    status = stage->store.sync(stage->store.self, &why);
    if (status != FIRN_OK)
        return tell(stage, fault, status, why);
    why = stage->replace ? take_over(stage) : settle(stage);
    if (why != 0)
        return tell(stage, fault, why == EEXIST ? FIRN_EXISTS : FIRN_CANNOT_CREATE, why);
    if (firn_store_file_sync_folder(stage->folder, firn_store_file_descriptor(&stage->store)) != 0)
        return tell(stage, fault, FIRN_IO, errno);
    return FIRN_OK;
}

void firn_store_stage_close(struct firn_store_stage *stage)
{
    if (stage == NULL)
        return;
    if (stage->temporary[0] != '\0')
        (void)unlinkat(stage->folder, stage->temporary, 0);
    if (stage->store.close != NULL)
        stage->store.close(stage->store.self);
    if (stage->folder >= 0)
        close(stage->folder);
    stage->memory->put(stage->memory->self, stage);
}
