/*
 * transfer/pax.h - metadata of an item as pax header bytes, and back
 *
 * Room: transfer. The bytes are made and read by libarchive: an extended header where the ustar header cannot hold it
 * all, then the ustar header (IEEE Std 1003.1-2001, pax). The same metadata gives the same bytes in every locale,
 * process and hour. Names are any bytes: libarchive would turn decomposed UTF-8 into composed on the way in, so names
 * are always read as binary here, and those that are no UTF-8 are also written so (hdrcharset=BINARY).
 *
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_TRANSFER_PAX_H
#define FIRN_TRANSFER_PAX_H

#include "firn/item.h"
#include "firn/memory.h"

#include <archive.h>
#include <archive_entry.h>
#include <locale.h>

/* Of one header: with FIRN_ITEM_EXTENTS_MAX extents it fits into one catalogue entry, and libarchive reads it. */
enum { FIRN_PAX_BYTES_MAX = 3 << 18 };

struct firn_pax;

enum firn_status firn_pax_make(const struct firn_memory *memory, struct firn_pax **out);
void firn_pax_free(struct firn_pax *pax);      /* takes NULL */

/*
 * libarchive goes by the locale of the calling thread. Between these two calls it is C.UTF-8; nest nothing.
 */
void firn_pax_enter(struct firn_pax *pax);
void firn_pax_leave(struct firn_pax *pax);

/* Takes away from an entry what is not kept: times but mtime, flags, holes, what other systems hang on to it. */
void firn_pax_strip(struct archive_entry *entry);

/*
 * An open libarchive writer whose options suit this entry, and which hands its bytes to write unbuffered. Call within
 * enter and leave. Close it while write refuses, then free it: it adds nothing then. (libarchive 3.6 never gives back
 * some memory of a writer that is freed after it failed.) NULL: memory is out.
 */
struct archive *firn_pax_writer(struct firn_pax *pax, struct archive_entry *entry, archive_write_callback *write,
                                void *self);

/*
 * The header of an entry, which is stripped first.
 *
 * bytes  out, lent until the next call
 *
 * FIRN_OK; FIRN_NO_MEMORY; FIRN_OVER_LIMIT: longer than FIRN_PAX_BYTES_MAX; FIRN_BAD_ARGUMENT: pax cannot say this (no
 * name, a socket).
 */
enum firn_status firn_pax_header(struct firn_pax *pax, struct archive_entry *entry, const uint8_t **bytes,
                                 size_t *count);

/*
 * The entry that an item's header stands for. Untrusted: one extended header at most, then one ustar header, and
 * nothing else; sums, lengths and record syntax must be right; the type and size must be those of the item.
 *
 * entry  out, lent until the next call; may be changed
 *
 * FIRN_OK, FIRN_NO_MEMORY, FIRN_BAD_DATA.
 */
enum firn_status firn_pax_entry(struct firn_pax *pax, const struct firn_item *item, struct archive_entry **entry);

/* Gives the entry of an item with holes its map of extents. */
void firn_pax_map(struct archive_entry *entry, const struct firn_item *item);

/* The type in the ustar header of an item, whatever stands there, without reading the rest; NUL if it is too short. */
char firn_pax_type(const struct firn_item *item);

#endif
