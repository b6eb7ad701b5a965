/*
 * firn/readback.h - reading back what was just written
 *
 * Room: container. Memory errors and failing media are caught here, while the source is still at hand.
 *
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_READBACK_H
#define FIRN_READBACK_H

#include "firn/reader.h"
#include "firn/writer.h"

/*
 * Syncs the store, lets the system forget what it has cached of it, and checks every block of it: all there, all sound,
 * of the container and the length that the writer tells; the title page as its protected copy has it.
 *
 * progress  called now and then with the blocks done; may be NULL
 *
 * FIRN_OK; FIRN_MISMATCH when it is not as it was written; else what reading returns.
 */
FIRN_API enum firn_status firn_readback(const struct firn_reader_options *options,
                                        const struct firn_writer_totals *totals,
                                        void (*progress)(void *self, uint64_t blocks), void *progress_self,
                                        struct firn_fault *fault);

#endif
