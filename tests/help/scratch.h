/*
 * tests/help/scratch.h - a folder of a test's own, and what stands in it
 *
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_TESTS_SCRATCH_H
#define FIRN_TESTS_SCRATCH_H

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>
#include <sys/types.h>

enum { SCRATCH_PATH_ROOM = 512 };

/* Makes a folder below TMPDIR (else /tmp) for the program; scratch_remove takes it away with all that is in it */
void scratch_make(void);
void scratch_remove(void);

/* The path of a name in the folder; "" for the folder itself. Valid for the next seven calls. */
const char *scratch_path(const char *name);

void scratch_write(const char *name, const void *bytes, size_t count, mode_t mode);

/* The bytes of a file, in memory for the caller to free; *count gets their number. NULL when there is no such file. */
uint8_t *scratch_read(const char *name, size_t *count);

/* How many names stand in the folder, hidden ones too. */
unsigned scratch_entries(void);

/* Runs deed in a child process. Returns what it returned (0 .. 255), or -1 when it ended by a signal. */
int scratch_in_child(int (*deed)(void *self), void *self);

/* Waits for a child process. Returns its exit status, or -1 when it ended by a signal. */
int scratch_wait(pid_t child);

/* For use in a child: goes on without root's rights. False when it cannot be. */
bool scratch_be_nobody(void);

#endif
