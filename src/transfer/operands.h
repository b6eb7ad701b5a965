/*
 * transfer/operands.h - which stored names belong to which operand, so that no name is stored twice
 *
 * Room: transfer. The rule stands at firn_intake_paths.
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_TRANSFER_OPERANDS_H
#define FIRN_TRANSFER_OPERANDS_H

#include "firn/memory.h"

#include <stdbool.h>
#include <sys/stat.h>

struct firn_operands;

enum firn_operands_claim {
    FIRN_OPERANDS_FREE,        /* nobody else's */
    FIRN_OPERANDS_SAME,        /* an earlier operand's, and it is the same file or folder */
    FIRN_OPERANDS_TAKEN        /* an earlier operand's, and something else */
};

enum firn_status firn_operands_make(const struct firn_memory *memory, struct firn_operands **out);
void firn_operands_free(struct firn_operands *operands);      /* takes NULL */

/*
 * Claims a stored name for an operand that is there (facts, not followed) as path.
 *
 * nested  out: earlier operands lie below this one, so firn_operands_ask must be asked on the way
 *
 * FIRN_OK or FIRN_NO_MEMORY. The claim is entered when it is FIRN_OPERANDS_FREE. path is lent until free.
 */
enum firn_status firn_operands_claim(struct firn_operands *operands, const char *stored, const char *path,
                                     const struct stat *facts, enum firn_operands_claim *claim, bool *nested);

/* Whether an item met on the way through an operand, not the operand itself, belongs to an earlier one. */
enum firn_operands_claim firn_operands_ask(const struct firn_operands *operands, const char *stored,
                                           const struct stat *facts);

/* Whether an earlier operand lies below this stored name. */
bool firn_operands_above(const struct firn_operands *operands, const char *stored);

#endif
