/* tests/care/journal_memory.c - the place of a mend journal in memory, with names that a power cut may undo */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "care/journal_memory.h"

#include "base/fault.h"

#include <errno.h>
#include <string.h>

static enum firn_status make(void *self, struct firn_store *store, struct firn_fault *fault)
{
    struct journal_memory *journal = self;

    if (journal->make_fails != FIRN_OK || journal->there)
        return firn_fault_tell(fault, journal->there ? FIRN_EXISTS : journal->make_fails, EACCES, 0,
                               journal->place.name);
    if (!fault_power_step(journal->power))
        return firn_fault_tell(fault, FIRN_CANNOT_CREATE, EIO, 0, journal->place.name);
    journal_memory_plant(journal, NULL, 0);
    memcpy(journal->file.rules, journal->rules, sizeof journal->rules);
    journal->there_on_medium = false;
    *store = journal->file.store;
    return FIRN_OK;
}

static enum firn_status settle(void *self, struct firn_fault *fault)
{
    struct journal_memory *journal = self;

    if (journal->settle_fails != FIRN_OK || !fault_power_step(journal->power))
        return firn_fault_tell(fault, FIRN_IO, EIO, 0, journal->place.name);
    journal->there_on_medium = journal->there;
    return FIRN_OK;
}

static enum firn_status open_there(void *self, struct firn_store *store, struct firn_fault *fault)
{
    struct journal_memory *journal = self;

    if (journal->open_fails != FIRN_OK)
        return firn_fault_tell(fault, journal->open_fails, 0, 0, journal->place.name);
    if (!journal->there)
        return FIRN_END;
    *store = journal->file.store;
    return FIRN_OK;
}

static enum firn_status take_away(void *self, struct firn_fault *fault)
{
    struct journal_memory *journal = self;

    if (journal->remove_fails != FIRN_OK || !fault_power_step(journal->power))
        return firn_fault_tell(fault, FIRN_IO, EIO, 0, journal->place.name);
    journal->there = false;
    return settle(self, fault);
}

void journal_memory_make(struct journal_memory *journal, struct fault_power *power)
{
    *journal = (struct journal_memory){
        .place = { journal, make, settle, open_there, take_away, "journal" }, .power = power
    };
}

void journal_memory_free(struct journal_memory *journal)
{
    fault_store_free(&journal->file);
}

void journal_memory_plant(struct journal_memory *journal, const uint8_t *bytes, size_t count)
{
    fault_store_free(&journal->file);
    fault_store_make(&journal->file, bytes, count);
    journal->file.power = journal->power;
    journal->there = journal->there_on_medium = true;
}

void journal_memory_power_back(struct journal_memory *journal, uint64_t seed)
{
    uint64_t state = ~seed;

    if (seed == UINT64_MAX || (seed != 0 && fault_random(&state) % 2 == 0))
        journal->there_on_medium = journal->there;
    journal->there = journal->there_on_medium;
    fault_store_power_back(&journal->file, seed);
}
