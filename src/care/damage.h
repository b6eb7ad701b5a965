/*
 * care/damage.h - models of damage: independent flips, lost blocks, runs, bursts, a missing end
 *
 * Room: care. Used by drill and by tests. Shares nothing with the code that repairs. Nothing but additions,
 * multiplications and divisions of doubles, whose results IEC 60559 prescribes, so the same seed spoils the same bytes
 * everywhere.
 *
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_CARE_DAMAGE_H
#define FIRN_CARE_DAMAGE_H

#include "firn/drill.h"
#include "firn/store.h"

/*
 * The next of a reproducible sequence: a Weyl sequence, scrambled. G. L. Steele, D. Lea, C. H. Flood, "Fast Splittable
 * Pseudorandom Number Generators", OOPSLA 2014, with the scrambling of its widespread 64-bit form.
 */
uint64_t firn_damage_random(uint64_t *state);

/*
 * Waiting times: how many trials fail before the first one succeeds, each with the chance `rate`. The binary digits of
 * such a number are independent of each other; digit i is 1 with the chance x / (1 + x), where x = (1 - rate)^(2^i).
 */
struct firn_damage_wait { uint64_t digit_chances[64]; bool never; };

/* rate 0 .. 1; 0 never succeeds */
void firn_damage_wait_make(double rate, struct firn_damage_wait *wait);

/* UINT64_MAX for never */
uint64_t firn_damage_wait_next(const struct firn_damage_wait *wait, uint64_t *state);

/* FIRN_OK, or FIRN_BAD_ARGUMENT: *wrong tells in words what cannot be done to a file of so many bytes. */
enum firn_status firn_damage_check(const struct firn_drill_damage *damage, uint64_t file_bytes, const char **wrong);

/*
 * Spoils a store. Trials with different numbers differ. FIRN_OK, FIRN_NO_MEMORY, FIRN_IO, FIRN_READ_ONLY. damage has
 * passed firn_damage_check.
 */
enum firn_status firn_damage_spoil(const struct firn_drill_damage *damage, uint64_t seed, uint64_t trial,
                                   struct firn_store *store, const struct firn_memory *memory,
                                   struct firn_drill_spoiled *spoiled, struct firn_fault *fault);

#endif
