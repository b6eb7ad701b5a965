/*
 * care/mend.h - repairing a container in place so that a power cut never leaves it worse
 *
 * Room: care. Good blocks go to a journal first, which is sealed and synced; then to their places; then the journal is
 * removed. A journal found sealed is played again, which does no harm however often; one found unsealed has had no
 * effect and is dropped. Only blocks that vouch for themselves (hash, guard words, container, place) are ever written.
 * Layout and rule: format-spec/mend.md.
 *
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_CARE_MEND_H
#define FIRN_CARE_MEND_H

#include "firn/block.h"
#include "firn/store.h"

/* Where the journal of a container lies: a file beside it (care/mend_file.h), or a test's memory. */
struct firn_mend_place {
    void *self;
    /* Makes the journal. FIRN_OK, FIRN_EXISTS, FIRN_CANNOT_CREATE, FIRN_NO_MEMORY. */
    enum firn_status (*make)(void *self, struct firn_store *journal, struct firn_fault *fault);
    /* The name of the journal is on the medium when this returns FIRN_OK; else FIRN_IO. */
    enum firn_status (*settle)(void *self, struct firn_fault *fault);
    /* Opens the journal that is there. FIRN_OK, FIRN_END: none is, FIRN_BAD_DATA: it is not ours, FIRN_IO. */
    enum firn_status (*open)(void *self, struct firn_store *journal, struct firn_fault *fault);
    /* Removes the journal for good. FIRN_OK or FIRN_IO. */
    enum firn_status (*remove)(void *self, struct firn_fault *fault);
    /* What to call it in a fault. */
    const char *name;
};

/* What a repair works on; lent until it is over. */
struct firn_mend_subject {
    struct firn_store *container;
    const struct firn_mend_place *place;
    const struct firn_memory *memory;
};

/* Counts of blocks; the title page counts as one. */
struct firn_mend_outcome {
    uint64_t written;      /* and read back as they should be */
    uint64_t refused;      /* the medium did not take them, or gives back something else */
    int os_error;          /* of the first that was refused, if the system said why */
    uint64_t refused_at;   /* its offset in the container */
};

struct firn_mend;

/*
 * Starts a journal for the container with this id.
 * FIRN_OK; what place->make returns; FIRN_NO_MEMORY; FIRN_IO. The container is untouched.
 */
enum firn_status firn_mend_begin(const struct firn_mend_subject *subject, const uint8_t id[FIRN_BLOCK_ID_BYTES],
                                 struct firn_fault *fault, struct firn_mend **out);

/* Adds a good block (FIRN_BLOCK_BYTES) that belongs at `at` of the container; the title page at 0. FIRN_OK, FIRN_IO. */
enum firn_status firn_mend_add(struct firn_mend *mend, uint64_t at, const uint8_t *block, struct firn_fault *fault);

/*
 * Seals the journal, writes its blocks to their places, reads them back, removes the journal.
 *
 * FIRN_OK        done; the outcome tells whether the medium took every block
 * FIRN_BAD_DATA  a block that was added does not vouch for itself; nothing was written
 * FIRN_IO        the journal could not be written whole: the container is untouched; or the container could not be
 *                synced: the journal stays for the next scrub
 */
enum firn_status firn_mend_finish(struct firn_mend *mend, struct firn_mend_outcome *outcome, struct firn_fault *fault);

/* Takes NULL. Removes a journal that was not sealed. */
void firn_mend_free(struct firn_mend *mend);

enum firn_mend_state {
    FIRN_MEND_NONE,        /* no journal is there */
    FIRN_MEND_UNSEALED,    /* one that was never finished */
    FIRN_MEND_SEALED,      /* one that waits to be played again */
    FIRN_MEND_OTHER,       /* one of another container */
    FIRN_MEND_STRANGE      /* no journal of ours at all, or one of a later version */
};

/*
 * Looks at what is in the journal's place of the container with this id, without changing anything.
 * FIRN_OK; FIRN_IO when it cannot be read; FIRN_NO_MEMORY.
 */
enum firn_status firn_mend_look(const struct firn_mend_subject *subject, const uint8_t id[FIRN_BLOCK_ID_BYTES],
                                enum firn_mend_state *state, struct firn_fault *fault);

/*
 * What every repair starts with: a sealed journal is played again and removed, an unsealed one removed.
 *
 * state    out  what was found
 * outcome  out  of a journal that was played
 *
 * FIRN_OK        nothing is in the way now
 * FIRN_BAD_DATA  something is that must not be touched (FIRN_MEND_OTHER, FIRN_MEND_STRANGE); the fault says what to do
 * FIRN_IO, FIRN_NO_MEMORY
 */
enum firn_status firn_mend_resume(const struct firn_mend_subject *subject, const uint8_t id[FIRN_BLOCK_ID_BYTES],
                                  enum firn_mend_state *state, struct firn_mend_outcome *outcome,
                                  struct firn_fault *fault);

#endif
