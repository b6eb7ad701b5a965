/*
 * tests/help/fault_store.h - a store over memory that fails when it is told to, and forgets what a power cut takes
 *
 * It keeps two pictures of its bytes: what a read gives now, and what is on the medium, which sync makes equal. A power
 * cut leaves of the difference, sector by sector, none, all or some.
 *
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_TESTS_FAULT_STORE_H
#define FIRN_TESTS_FAULT_STORE_H

#include "firn/store.h"

#include <stddef.h>
#include <stdint.h>

enum { FAULT_SECTOR_BYTES = 512, FAULT_RANGES_MAX = 16 };

/* A supply that may feed several stores. A step is a write, a resize, a sync, or what else a test counts as one. */
struct fault_power {
    uint64_t steps;          /* done so far */
    uint64_t cut_after;      /* so many steps succeed; 0 means that the power stays */
    bool off;                /* every call fails with EIO now */
};

/* Counts a step. False when the power is off: the step does not happen. */
bool fault_power_step(struct fault_power *power);

enum fault_deed { FAULT_READ, FAULT_WRITE, FAULT_SYNC, FAULT_DEEDS };

/* From call `from` on (1: the first, 0: never) `times` calls fail with os_error (0: EIO); halfway: after half of it. */
struct fault_rule { uint64_t from, times; int os_error; bool halfway; };

/*
 * Reads (and, if so told, writes) that touch these bytes fail with EIO once they get there. Or, if they swallow, reads
 * and writes succeed, but nothing that is written lands.
 */
struct fault_range { uint64_t at, bytes; bool writes_too, swallows; };

struct fault_picture { uint8_t *bytes; size_t used, room; };

struct fault_store {
    struct firn_store store;
    struct fault_picture now, kept;
    struct fault_rule rules[FAULT_DEEDS];
    uint64_t calls[FAULT_DEEDS];
    struct fault_range ranges[FAULT_RANGES_MAX];
    size_t range_count;
    uint64_t room_bytes;              /* writes beyond fail with ENOSPC; 0: no limit */
    struct fault_power *power;        /* may be NULL */
};

/* Starts with a copy of bytes[0 .. count), which is on the medium. The caller ends it with fault_store_free. */
void fault_store_make(struct fault_store *fault, const uint8_t *bytes, size_t count);
void fault_store_free(struct fault_store *fault);

/* Rules, ranges and counts back to none. */
void fault_store_calm(struct fault_store *fault);

/*
 * What is there when the power is back. seed 0: nothing landed that was not synced; UINT64_MAX: all of it did; else a
 * sector here and there, and the size of before or after.
 */
void fault_store_power_back(struct fault_store *fault, uint64_t seed);

/* The next number of a reproducible sequence: linear congruential modulo 2^64, high half folded onto the low one. */
uint64_t fault_random(uint64_t *state);

#endif
