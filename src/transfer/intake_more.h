/*
 * transfer/intake_more.h - digests beyond SHA-256 of what is taken in, made from the very bytes that are stored
 *
 * Room: transfer.
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_TRANSFER_INTAKE_MORE_H
#define FIRN_TRANSFER_INTAKE_MORE_H

#include "firn/intake.h"

struct firn_intake_more;

/* digests: enum firn_intake_digest, or'ed. FIRN_OK, FIRN_NO_MEMORY, FIRN_FOREIGN_FORMAT as firn_digest_make_kind. */
enum firn_status firn_intake_more_make(unsigned digests, const struct firn_memory *memory,
                                       struct firn_intake_more **out);
void firn_intake_more_free(struct firn_intake_more *more);      /* takes NULL */

/* A new item; its size and extents are read. FIRN_OK or FIRN_NO_MEMORY. */
enum firn_status firn_intake_more_start(struct firn_intake_more *more, const struct firn_item *item);
/* Bytes of its extents, in order. */
void firn_intake_more_add(struct firn_intake_more *more, const uint8_t *bytes, size_t count);
/* Its digests, lent until the next item. */
const struct firn_intake_digests *firn_intake_more_finish(struct firn_intake_more *more);

#endif
