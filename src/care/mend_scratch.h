/*
 * care/mend_scratch.h - the mend journal of a container that nobody else sees yet, in a nameless temporary file
 *
 * Room: care. For copies that are rehearsed on and containers that are still being put together: when power or process
 * fail, they are gone together with their journal.
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_CARE_MEND_SCRATCH_H
#define FIRN_CARE_MEND_SCRATCH_H

#include "care/mend.h"

/* `folder` (NULL: TMPDIR, else /tmp) and memory are lent for as long as the place is. */
struct firn_mend_scratch {
    struct firn_mend_place place;
    const char *folder;
    const struct firn_memory *memory;
};

void firn_mend_scratch_make(const char *folder, const struct firn_memory *memory, struct firn_mend_scratch *scratch);

#endif
