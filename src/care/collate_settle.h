/*
 * care/collate_settle.h - what is missing of a container that was gathered: votes, the reserve, the title page
 *
 * Room: care.
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_CARE_COLLATE_SETTLE_H
#define FIRN_CARE_COLLATE_SETTLE_H

#include "care/collate_run.h"

/*
 * Finishes container `index`, reads it back and gives its file its name; container->told is complete then. What no
 * block of can be recognised gets no file: FIRN_OK, and told.path NULL.
 * FIRN_OK, FIRN_EXISTS, FIRN_CANNOT_CREATE, FIRN_IO, FIRN_MISMATCH, FIRN_NO_MEMORY, FIRN_STOPPED
 */
enum firn_status firn_collate_settle(struct firn_collate *collate, unsigned index, struct firn_fault *fault);

#endif
