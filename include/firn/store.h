/*
 * firn/store.h - the one place that opens, reads, writes and syncs a container
 *
 * Room: container. A store is a few calls over something with numbered bytes. The library brings files, pipes,
 * temporary files and memory; a test brings stores that fail. Calls of one store are for one thread at a time.
 *
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_STORE_H
#define FIRN_STORE_H

#include "firn/memory.h"

#include <stdbool.h>

struct firn_store {
    void *self;
    /* Reads at `at`; *got is less than count only at the end. FIRN_OK; FIRN_IO with *os_error, *got bytes are good. */
    enum firn_status (*read_at)(void *self, uint64_t at, void *bytes, size_t count, size_t *got, int *os_error);
    /* Writes all of it. FIRN_OK, FIRN_IO, FIRN_READ_ONLY. A pipe takes bytes only where the last call ended. */
    enum firn_status (*write_at)(void *self, uint64_t at, const void *bytes, size_t count, int *os_error);
    enum firn_status (*size)(void *self, uint64_t *bytes, int *os_error);
    enum firn_status (*resize)(void *self, uint64_t bytes, int *os_error);
    /* What was written is on the medium when this returns FIRN_OK. */
    enum firn_status (*sync)(void *self, int *os_error);
    /* Tells that what was read, or written and synced, is not needed again soon: a later read comes from the medium. */
    void (*forget)(void *self, uint64_t at, uint64_t bytes);
    void (*close)(void *self);
    /*
     * Lends bytes[at .. at + count), to look at and to write on without a trace, until the next call of lend or close.
     * NULL where the store cannot. Anything but FIRN_OK: not now, not there, or not all of it readable; read_at tells
     * more. Saves the copy of read_at, which costs as much as judging what was read. A file that somebody else cuts
     * short meanwhile ends the process (SIGBUS): whoever cuts containers short while they are read has other troubles.
     */
    enum firn_status (*lend)(void *self, uint64_t at, size_t count, uint8_t **bytes);
};

enum firn_store_use { FIRN_STORE_READ, FIRN_STORE_MEND };

/*
 * Opens a file or a block device; the caller closes it.
 *
 * FIRN_OK
 * FIRN_NO_INPUT   cannot be opened; os_error is EISDIR for a folder, ESPIPE for what cannot be searched
 *                 (firn_store_spool)
 * FIRN_READ_ONLY  for MEND: it can be read, but not written
 * FIRN_NO_MEMORY
 */
FIRN_API enum firn_status firn_store_open(const char *path, enum firn_store_use use, const struct firn_memory *memory,
                                          struct firn_store *store, struct firn_fault *fault);

/*
 * Keeps every other run that asks too from working on this file until it is closed. FIRN_OK, FIRN_BUSY, FIRN_IO. A
 * store that is no file needs no lock: FIRN_OK.
 */
FIRN_API enum firn_status firn_store_lock(struct firn_store *store, struct firn_fault *fault);

/* Writes to a descriptor that cannot be searched, such as standard output; close does not close it. */
FIRN_API enum firn_status firn_store_pipe(int descriptor, const struct firn_memory *memory, struct firn_store *store);

/* A nameless temporary file, gone when closed, in folder (NULL: TMPDIR, else /tmp). FIRN_OK, FIRN_CANNOT_CREATE, ... */
FIRN_API enum firn_status firn_store_temporary(const char *folder, const struct firn_memory *memory,
                                               struct firn_store *store, struct firn_fault *fault);

/* What a call that may take long tells, and by what it may be stopped; each function may be NULL. */
struct firn_store_watch {
    void *self;
    void (*progress)(void *self, uint64_t at, uint64_t bytes);
    bool (*stop)(void *self);
};

/*
 * Copies a descriptor to its end into a temporary file, so that it can be searched. A file at its start is not copied,
 * but used as it is. The descriptor stays the caller's.
 *
 * watch  may be NULL. Asked to stop before each read, and when a signal has interrupted one: a pipe may be silent for
 *        long. Progress has 0 for the bytes that there are to copy, since nobody knows.
 *
 * FIRN_OK, FIRN_IO, FIRN_CANNOT_CREATE, FIRN_NO_MEMORY, FIRN_STOPPED.
 */
FIRN_API enum firn_status firn_store_spool(int descriptor, const struct firn_store_watch *watch,
                                           const struct firn_memory *memory, struct firn_store *store,
                                           struct firn_fault *fault);

/* `capacity` bytes lent by the caller, holding `used`; writing grows used up to capacity, then fails with ENOSPC. */
struct firn_store_buffer { uint8_t *bytes; size_t capacity, used; };
FIRN_API void firn_store_memory(struct firn_store_buffer *buffer, struct firn_store *store);

/*
 * Puts patience in front of a store: a block that cannot be read, or does not read right, is read again, up to
 * `readings` times and each time from the medium as far as the system lets us. The hash decides about each reading, and
 * failing that about what the majority of the readings says bit by bit. What the lanes can mend is left to them.
 *
 * inner  lent until the new store is closed. readings 0 .. 31.
 *
 * FIRN_OK, FIRN_NO_MEMORY.
 */
FIRN_API enum firn_status firn_store_patient(struct firn_store *inner, unsigned readings,
                                             const struct firn_memory *memory, struct firn_store *store);

/* How many blocks read right only when they were read again; 0 for a store of another kind. */
FIRN_API uint64_t firn_store_patient_gained(const struct firn_store *store);

/*
 * Looks for the blocks of a container that are not where they belong, because the head of the file is missing, or bytes
 * were inserted or lost in it. Goes through all of it once; then shows each block in its place, read-only. Places that
 * no block is known for read as zeros. Where several containers are found, it is the one with the most good blocks.
 *
 * inner      lent until the new store is closed
 * watch      may be NULL
 * stretches  out  how many pieces it is in
 *
 * FIRN_OK; FIRN_END: no block is there, or all of them are where they belong; FIRN_IO, FIRN_NO_MEMORY, FIRN_STOPPED
 */
FIRN_API enum firn_status firn_store_realign(struct firn_store *inner, const struct firn_store_watch *watch,
                                             const struct firn_memory *memory, struct firn_store *store,
                                             uint64_t *stretches, struct firn_fault *fault);

/*
 * A file that appears under its name only when it is whole. Nameless until kept where the system can do that; else
 * under a temporary name beside it.
 */
struct firn_store_stage;

/*
 * replace  an existing file may be taken over when the stage is kept; without it FIRN_EXISTS, now or then. Folders and
 *          devices are never taken over.
 * FIRN_OK, FIRN_EXISTS, FIRN_CANNOT_CREATE, FIRN_NO_MEMORY.
 */
FIRN_API enum firn_status firn_store_stage_open(const char *path, bool replace, const struct firn_memory *memory,
                                                struct firn_store_stage **out, struct firn_fault *fault);
/* The stage's to close, not the caller's. */
FIRN_API struct firn_store *firn_store_stage_store(struct firn_store_stage *stage);
/* Its descriptor, for those who write one byte after another; the stage's own. */
FIRN_API int firn_store_stage_descriptor(struct firn_store_stage *stage);
/* Syncs, gives it its name, syncs the folder. Called once. FIRN_OK, FIRN_EXISTS, FIRN_CANNOT_CREATE, FIRN_IO. */
FIRN_API enum firn_status firn_store_stage_keep(struct firn_store_stage *stage, struct firn_fault *fault);
/* Takes NULL. Closes; what was not kept is gone without a trace. */
FIRN_API void firn_store_stage_close(struct firn_store_stage *stage);

/* Removes a file and syncs its folder; a file that is not there is FIRN_OK. */
FIRN_API enum firn_status firn_store_remove(const char *path, struct firn_fault *fault);

#endif
