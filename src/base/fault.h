/*
 * base/fault.h - filling in a lent struct firn_fault
 *
 * Room: base.
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_BASE_FAULT_H
#define FIRN_BASE_FAULT_H

#include "firn/status.h"

/* Writes what happened where into fault (NULL is allowed) and returns status, so that a failing call is one line. */
enum firn_status firn_fault_tell(struct firn_fault *fault, enum firn_status status, int os_error, uint64_t at,
                                 const char *what);

#endif
