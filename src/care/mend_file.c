/* care/mend_file.c - the mend journal as a file beside its container */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "care/mend_file.h"

#include "base/fault.h"
#include "container/store_beside.h"

#include <errno.h>
#include <string.h>

static enum firn_status make_journal(void *self, struct firn_store *journal, struct firn_fault *fault)
{
    struct firn_mend_file *file = self;

    if (file->path == NULL)
        return firn_fault_tell(fault, FIRN_CANNOT_CREATE, ENOTSUP, 0, file->place.name);
    return firn_store_beside_make(file->path, file->memory, journal, fault);
}

static enum firn_status settle_journal(void *self, struct firn_fault *fault)
{
    return firn_store_beside_settle(((struct firn_mend_file *)self)->path, fault);
}

static enum firn_status open_journal(void *self, struct firn_store *journal, struct firn_fault *fault)
{
    struct firn_mend_file *file = self;

    if (file->path == NULL)
        return FIRN_END;
    return firn_store_beside_open(file->path, file->container, file->memory, journal, fault);
}

static enum firn_status remove_journal(void *self, struct firn_fault *fault)
{
    return firn_store_remove(((struct firn_mend_file *)self)->path, fault);
}

enum firn_status firn_mend_file_make(const char *path, const struct firn_store *container,
                                     const struct firn_memory *memory, struct firn_mend_file **out,
                                     struct firn_fault *fault)
{
    size_t path_bytes = strlen(path) + 1;
    struct firn_mend_file *file = memory->get(memory->self, sizeof *file + path_bytes);
    enum firn_status status;

    *out = NULL;
    if (file == NULL)
        return firn_fault_tell(fault, FIRN_NO_MEMORY, 0, 0, path);
    *file = (struct firn_mend_file){ .container = container, .memory = memory };
    memcpy(file->container_path, path, path_bytes);
    status = firn_store_beside_path(path, ".mend", memory, &file->path, fault);
    if (status != FIRN_OK && status != FIRN_CANNOT_CREATE) {
        firn_mend_file_free(file);
        return status;
    }
    file->place = (struct firn_mend_place){ file, make_journal, settle_journal, open_journal, remove_journal,
                                            file->path != NULL ? file->path : file->container_path };
    *out = file;
    return FIRN_OK;
}

void firn_mend_file_free(struct firn_mend_file *file)
{
    if (file == NULL)
        return;
    file->memory->put(file->memory->self, file->path);
    file->memory->put(file->memory->self, file);
}
