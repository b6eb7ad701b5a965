/*
 * transfer/manifest_lines.h - the lines of a manifest or a tag file, however they end, and the paths in them
 *
 * Room: transfer. RFC 8493: lines end with LF, CR or CRLF.
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_TRANSFER_MANIFEST_LINES_H
#define FIRN_TRANSFER_MANIFEST_LINES_H

#include "firn/memory.h"

#include <stdbool.h>

/* A line without its end, which may be changed; never an empty one. FIRN_BAD_DATA with a phrase of what is wrong. */
typedef enum firn_status (firn_manifest_lines_taker)(void *self, char *line, const char **fault);

/*
 * Reads a descriptor to its end. FIRN_OK; FIRN_NO_MEMORY; FIRN_IO; what take returns: fault->at is the number of the
 * line then, from 1, and fault->what the phrase.
 */
enum firn_status firn_manifest_lines_read(int descriptor, const struct firn_memory *memory,
                                          firn_manifest_lines_taker *take, void *self, struct firn_fault *fault);

/* Turns %0A, %0D and %25, or, with backslashes, \n, \r and \\, into what they stand for, in place. */
void firn_manifest_lines_decode(char *path, bool backslashes);

#endif
