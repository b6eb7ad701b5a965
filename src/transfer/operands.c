/* transfer/operands.c - which stored names belong to which operand */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "transfer/operands.h"

#include "base/memory.h"
#include "transfer/names.h"

#include <fcntl.h>

struct firn_operands {
    const struct firn_memory *memory;
    struct firn_names *names;        /* stored names of operands, and all folders above them */
};

struct claim {
    bool whole;                      /* an operand's own name */
    bool above;                      /* an operand lies below it */
    bool folder;                     /* the operand is one */
    dev_t device;
    ino_t inode;
    const char *path;
};

enum firn_status firn_operands_make(const struct firn_memory *memory, struct firn_operands **out)
{
    struct firn_operands *operands = firn_memory_get_zeroed(memory, 1, sizeof *operands);
    enum firn_status status = FIRN_NO_MEMORY;

    *out = NULL;
    if (operands == NULL)
        return status;
    operands->memory = memory;
    status = firn_names_make(memory, sizeof(struct claim), &operands->names);
    if (status != FIRN_OK) {
        firn_operands_free(operands);
        return status;
    }
    *out = operands;
    return FIRN_OK;
}

void firn_operands_free(struct firn_operands *operands)
{
    if (operands == NULL)
        return;
    firn_names_free(operands->names);
    operands->memory->put(operands->memory->self, operands);
}

static enum firn_operands_claim compare(const struct claim *claim, const struct stat *facts)
{
    return claim->device == facts->st_dev && claim->inode == facts->st_ino ? FIRN_OPERANDS_SAME : FIRN_OPERANDS_TAKEN;
}

/*
 * Whether `rest` leads from an earlier operand to something that was stored with it: from folder to folder, never
 * through a symbolic link. A name that would lie below anything but a folder is taken, too.
 */
static enum firn_status follow(const struct firn_operands *operands, const struct claim *claim, const char *rest,
                               const struct stat *facts, enum firn_operands_claim *found)
{
    size_t room = strlen(claim->path) + strlen(rest) + 2;
    char *path = operands->memory->get(operands->memory->self, room);
    size_t used = strlen(claim->path);
    struct stat met = { .st_mode = claim->folder ? S_IFDIR : S_IFREG };

    if (path == NULL)
        return FIRN_NO_MEMORY;
    memcpy(path, claim->path, used + 1);
    *found = FIRN_OPERANDS_TAKEN;
    while (S_ISDIR(met.st_mode)) {
        size_t bytes = strcspn(rest, "/");

        path[used++] = '/';
        memcpy(path + used, rest, bytes);
        used += bytes;
        path[used] = '\0';
        if (fstatat(AT_FDCWD, path, &met, AT_SYMLINK_NOFOLLOW) != 0) {
            *found = FIRN_OPERANDS_FREE;
            break;
        }
        if (rest[bytes] == '\0') {
            *found = met.st_dev == facts->st_dev && met.st_ino == facts->st_ino ? FIRN_OPERANDS_SAME
                                                                                : FIRN_OPERANDS_TAKEN;
            break;
        }
        rest += bytes + 1;
    }
    operands->memory->put(operands->memory->self, path);
    return FIRN_OK;
}

/* Asks the operand of that name, and those of all folders above it. */
static enum firn_status ask_above(const struct firn_operands *operands, const char *stored, const struct stat *facts,
                                  enum firn_operands_claim *found)
{
    size_t bytes = strlen(stored);
    enum firn_status status = FIRN_OK;
    bool top = false;

    *found = FIRN_OPERANDS_FREE;
    while (status == FIRN_OK && *found == FIRN_OPERANDS_FREE && !top) {
        const struct claim *claim = firn_names_find(operands->names, stored, bytes);

        if (claim != NULL && claim->whole && stored[bytes] == '\0')
            *found = compare(claim, facts);
        else if (claim != NULL && claim->whole)
            status = follow(operands, claim, stored + bytes + (bytes > 0), facts, found);
        top = bytes == 0;
        while (bytes > 0 && stored[--bytes] != '/')
            ;
    }
    return status;
}

static enum firn_status enter(struct firn_operands *operands, const char *stored, const char *path,
                              const struct stat *facts)
{
    size_t bytes = strlen(stored);
    void *record;
    enum firn_status status = firn_names_add(operands->names, stored, bytes, &record, NULL);
    struct claim *claim = record;

    if (status != FIRN_OK)
        return status;
    claim->whole = true;
    claim->folder = S_ISDIR(facts->st_mode);
    claim->device = facts->st_dev;
    claim->inode = facts->st_ino;
    claim->path = path;
    while (bytes > 0 && status == FIRN_OK) {
        while (bytes > 0 && stored[--bytes] != '/')
            ;
        status = firn_names_add(operands->names, stored, bytes, &record, NULL);
        if (status == FIRN_OK)
            ((struct claim *)record)->above = true;
    }
    return status;
}

enum firn_status firn_operands_claim(struct firn_operands *operands, const char *stored, const char *path,
                                     const struct stat *facts, enum firn_operands_claim *claim, bool *nested)
{
    enum firn_status status = ask_above(operands, stored, facts, claim);

    *nested = firn_operands_above(operands, stored);
    if (status == FIRN_OK && *claim == FIRN_OPERANDS_FREE)
        status = enter(operands, stored, path, facts);
    return status;
}

enum firn_operands_claim firn_operands_ask(const struct firn_operands *operands, const char *stored,
                                           const struct stat *facts)
{
    const struct claim *claim = firn_names_find(operands->names, stored, strlen(stored));

    if (claim == NULL)
        return FIRN_OPERANDS_FREE;
    if (claim->whole)
        return compare(claim, facts);
    return S_ISDIR(facts->st_mode) ? FIRN_OPERANDS_FREE : FIRN_OPERANDS_TAKEN;
}

bool firn_operands_above(const struct firn_operands *operands, const char *stored)
{
    const struct claim *claim = firn_names_find(operands->names, stored, strlen(stored));

    return claim != NULL && claim->above;
}
