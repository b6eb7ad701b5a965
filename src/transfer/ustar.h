/*
 * transfer/ustar.h - the frame of a pax header: is it one at all
 *
 * Room: transfer. libarchive reads many kinds of tar, and more than one header at a time; an item has one header, made
 * the way packing makes it. This looks at the frame before libarchive sees it. Offsets: IEEE Std 1003.1-2001, pax,
 * "ustar Interchange Format" and "pax Extended Header".
 *
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_TRANSFER_USTAR_H
#define FIRN_TRANSFER_USTAR_H

#include "firn/status.h"

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

enum { FIRN_USTAR_BYTES = 512, FIRN_USTAR_SIZE_AT = 124, FIRN_USTAR_SUM_AT = 148, FIRN_USTAR_TYPE_AT = 156 };

struct firn_ustar_layout {
    size_t records_bytes;      /* of the extended header's records, from byte 512 on; 0 without one */
    bool binary;               /* they say hdrcharset=BINARY */
    bool foreign_names;        /* a name among them is not plain ASCII */
};

/*
 * FIRN_OK: at most one extended header (type x), then one header of type 0 .. 6, and not a byte more; sums right; every
 * record of the form "length key=value\n", no NUL in a name, and none that changes how the content would be read.
 * FIRN_BAD_DATA otherwise.
 */
enum firn_status firn_ustar_check(const uint8_t *bytes, size_t count, struct firn_ustar_layout *layout);

/* Rounded up to whole records of 512 bytes. */
size_t firn_ustar_padded(size_t bytes);

/* Writes another size into a header and puts its sum right. size < 8 GiB. */
void firn_ustar_set_size(uint8_t *header, size_t size);

#endif
