/*
 * container/slim.h - ustar headers without the digits that follow from the rest of their entry
 *
 * Room: container. Catalogues are pax headers, and what costs most in them is what cannot be foreseen: among it digits
 * that say nothing new, the sum over the header and the size, which the entry tells as well. In an entry they are NUL
 * and are put back when it is read. Layout: format-spec/catalogue.md.
 *
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_CONTAINER_SLIM_H
#define FIRN_CONTAINER_SLIM_H

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

/*
 * Takes the digits out of a pax header of whole ustar blocks, of a file of that size, if all can be put back as they
 * were. Returns whether they were taken; if not, nothing has changed.
 */
bool firn_slim_down(uint8_t *pax, size_t pax_bytes, uint64_t file_bytes);

/* Puts them back. */
void firn_slim_fill(uint8_t *pax, size_t pax_bytes, uint64_t file_bytes);

#endif
