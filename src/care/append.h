/*
 * care/append.h - a file of lines that grows from run to run
 *
 * Room: care. Each line goes out in one write at the end of the file and is on the medium before the call returns, so
 * that two runs may write to one file, and a power cut costs the line at hand at most. A torn last line is ended before
 * the next one begins.
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_CARE_APPEND_H
#define FIRN_CARE_APPEND_H

#include "firn/status.h"

#include <stddef.h>

/* A descriptor for firn_append_line, for the caller to close; -1 on FIRN_CANNOT_CREATE. */
enum firn_status firn_append_open(const char *path, int *descriptor, struct firn_fault *fault);

/* bytes end with the only LF among them. FIRN_OK or FIRN_IO. path names the file in faults. */
enum firn_status firn_append_line(int descriptor, const char *path, const char *bytes, size_t count,
                                  struct firn_fault *fault);

#endif
