/* care/mend_scratch.c - the mend journal in a nameless temporary file */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "care/mend_scratch.h"

/* Syncing what is gone with the process anyway only costs time. */
static enum firn_status sync_nothing(void *self, int *os_error)
{
    (void)self;
    *os_error = 0;
    return FIRN_OK;
}

static enum firn_status make_journal(void *self, struct firn_store *journal, struct firn_fault *fault)
{
    struct firn_mend_scratch *scratch = self;
    enum firn_status status = firn_store_temporary(scratch->folder, scratch->memory, journal, fault);

    if (status == FIRN_OK)
        journal->sync = sync_nothing;
    return status;
}

static enum firn_status settle_journal(void *self, struct firn_fault *fault)
{
    (void)self, (void)fault;
    return FIRN_OK;
}

/* Without a name there is never one that somebody left behind. */
static enum firn_status open_journal(void *self, struct firn_store *journal, struct firn_fault *fault)
{
    (void)self, (void)journal, (void)fault;
    return FIRN_END;
}

static enum firn_status remove_journal(void *self, struct firn_fault *fault)
{
    (void)self, (void)fault;
    return FIRN_OK;
}

void firn_mend_scratch_make(const char *folder, const struct firn_memory *memory, struct firn_mend_scratch *scratch)
{
    *scratch = (struct firn_mend_scratch){
        .place = { scratch, make_journal, settle_journal, open_journal, remove_journal, "the journal of the copy" },
        .folder = folder, .memory = memory
    };
}
