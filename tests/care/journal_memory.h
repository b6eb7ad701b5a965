/*
 * tests/care/journal_memory.h - the place of a mend journal in memory, with names that a power cut may undo
 *
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_TESTS_JOURNAL_MEMORY_H
#define FIRN_TESTS_JOURNAL_MEMORY_H

#include "care/mend.h"
#include "help/fault_store.h"

struct journal_memory {
    struct firn_mend_place place;
    struct fault_store file;
    bool there, there_on_medium;
    struct fault_power *power;                           /* may be NULL */
    enum firn_status make_fails, settle_fails, open_fails, remove_fails;      /* FIRN_OK: they do not */
    struct fault_rule rules[FAULT_DEEDS];                /* for the next journal that is made */
};

void journal_memory_make(struct journal_memory *journal, struct fault_power *power);
void journal_memory_free(struct journal_memory *journal);

/* Puts a journal of these bytes there. */
void journal_memory_plant(struct journal_memory *journal, const uint8_t *bytes, size_t count);

/* What is there when the power is back; seed as for fault_store_power_back. */
void journal_memory_power_back(struct journal_memory *journal, uint64_t seed);

#endif
