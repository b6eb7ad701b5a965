/*
 * care/mend_file.h - the mend journal as a file beside its container: FILE.mend
 *
 * Room: care.
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_CARE_MEND_FILE_H
#define FIRN_CARE_MEND_FILE_H

#include "care/mend.h"

struct firn_mend_file {
    struct firn_mend_place place;
    const struct firn_store *container;
    const struct firn_memory *memory;
    char *path;      /* NULL beside a device, where nothing would outlast a power cut: no journal can be made */
    char container_path[];
};

/* The place beside the file that path leads to, links followed. FIRN_OK, FIRN_NO_INPUT, FIRN_NO_MEMORY. */
enum firn_status firn_mend_file_make(const char *path, const struct firn_store *container,
                                     const struct firn_memory *memory, struct firn_mend_file **out,
                                     struct firn_fault *fault);
void firn_mend_file_free(struct firn_mend_file *file);      /* takes NULL */

#endif
