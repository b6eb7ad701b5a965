/* desk/staged.c - a report that appears under its name only when it is whole */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "desk/staged.h"

#include "base/fault.h"
#include "firn/store.h"

#include <stdlib.h>

static enum firn_status write_bytes(const char *path, const char *bytes, size_t count, struct firn_fault *fault)
{
    struct firn_store_stage *stage;
    struct firn_store *store;
    enum firn_status status = firn_store_stage_open(path, true, firn_memory_system(), &stage, fault);
    int why = 0;

    if (status != FIRN_OK)
        return status;
    store = firn_store_stage_store(stage);
    status = store->write_at(store->self, 0, bytes, count, &why);
    if (status != FIRN_OK)
        (void)firn_fault_tell(fault, status, why, 0, path);
    else
        status = firn_store_stage_keep(stage, fault);
    firn_store_stage_close(stage);
    return status;
}

enum firn_status firn_staged_write(const char *path, firn_staged_writer *write, void *self, struct firn_fault *fault)
{
    char *bytes = NULL;
    size_t count = 0;
    FILE *out = open_memstream(&bytes, &count);
    enum firn_status status = FIRN_NO_MEMORY;

    if (out != NULL) {
        bool whole;

        write(self, out);
        whole = ferror(out) == 0;
        if (fclose(out) == 0 && whole)
            status = write_bytes(path, bytes, count, fault);
    }
    free(bytes);
    return status == FIRN_NO_MEMORY ? firn_fault_tell(fault, status, 0, 0, path) : status;
}
