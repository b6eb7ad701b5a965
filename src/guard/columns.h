/*
 * guard/columns.h - wrong bytes of a row, found and put right column by column
 *
 * Room: guard. Pure. Used by guard/rescue.c. Column b of a row is byte b of each of its k + m payloads: one word of
 * the code of firn/reserve.h. With f payloads gone, up to e wrong bytes of a column are found and put right as long
 * as 2 e + f <= m, wherever they are; the reserve alone needs to be told where.
 *
 * All columns at once, by the vector loops of the reserve: the recomputed reserve differs from the reserve that was
 * read by a word d that is 0 beyond the points 0 .. m - 1 and that the errors alone decide. With G(z) = the product
 * of (z + x) over the points that are gone, the sums over j < m of G(j) j^l d(j), l < m - f, are the syndromes of a
 * word whose errors are those in the payloads that are there, times G. Columns where all are 0 are right as they are;
 * the others go through guard/locator.h one by one, their roots sought by the vector loops again, four columns at a
 * time.
 *
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_GUARD_COLUMNS_H
#define FIRN_GUARD_COLUMNS_H

#include "guard/reserve_engine.h"

enum { FIRN_COLUMNS_BYTES_MOST = 3968, FIRN_COLUMNS_PAYLOADS_MOST = 256 };

enum firn_columns_standing {
    FIRN_COLUMNS_KNOWN,      /* right, and never changed */
    FIRN_COLUMNS_READ,       /* as read: some bytes may be wrong */
    FIRN_COLUMNS_GONE        /* neither read nor changed */
};

struct firn_columns_row {
    unsigned k, m;                    /* as in firn/reserve.h */
    uint8_t *const *payloads;         /* k + m, data first; NULL for a data payload of zeros: known */
    const uint8_t *standings;         /* k + m, each an enum firn_columns_standing */
    size_t bytes;                     /* of each payload, at most FIRN_COLUMNS_BYTES_MOST */
    unsigned chance_bits;             /* how sure to be, see below */
};

size_t firn_columns_work_bytes(void);

/*
 * solved  in/out  `bytes` flags: columns that are known to be words of the code in what is not gone. They are left as
 *                 they are, the others are tried, and those that are now are added.
 * wrong   in/out  k + m counts: how many bytes of each payload were put right is added
 * work    firn_columns_work_bytes(), aligned to 64
 *
 * A column with more errors than the code can bear may be close to a word that was never written. It is left alone when
 * the chance that a random column looks as good as it would is above 2^-chance_bits. With m = 32 and nothing gone it
 * never is; for small m it depends on how few bits would change. With 0 every column within 2 e + f <= m
 * is put right.
 *
 * FIRN_OK; FIRN_BEYOND_REPAIR when more than m payloads are gone; FIRN_BAD_ARGUMENT. Allocates nothing.
 */
enum firn_status firn_columns_mend(const struct firn_columns_row *row, uint8_t *solved, uint32_t *wrong, uint8_t *work);
enum firn_status firn_columns_mend_by(const struct firn_reserve_engine *engine, const struct firn_columns_row *row,
                                      uint8_t *solved, uint32_t *wrong, uint8_t *work);

#endif
