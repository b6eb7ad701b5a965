/*
 * firn/expect.h - holding what is taken in against the donor's manifest
 *
 * Room: transfer. A manifest is lines of a SHA-256, SHA-512 or MD5 in hexadecimal, spaces or tabs, and a path: those of
 * a BagIt bag (RFC 8493, section 2.1.3), or what sha256sum, sha512sum and md5sum of GNU coreutils write. MD5 withstands
 * accidents, nobody's intentions. Lines end with LF, CR or CRLF. In a path %0A, %0D and %25 stand for LF, CR and %; a
 * path as it stands, undecoded, is looked for as well. A `*` before a path is the mark of coreutils for binary mode; a
 * line that begins with a backslash is one of theirs in which \\, \n and \r stand for backslash, LF and CR. Paths are
 * brought into the form of stored names (firn/intake.h).
 *
 * A path may be told from where the whole collection lies, from the folder in which the operand lies, or from inside
 * the operand. So an item `srv/in/bag/data/x` taken in with the operand /srv/in/bag is looked for as
 * `srv/in/bag/data/x`, as `bag/data/x`, and as `data/x`; the first of them that the manifest lists counts.
 *
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_EXPECT_H
#define FIRN_EXPECT_H

#include "firn/intake.h"

struct firn_expect;

enum firn_expect_verdict {
    FIRN_EXPECT_MATCH,
    FIRN_EXPECT_MISMATCH,
    FIRN_EXPECT_UNLISTED       /* the manifest does not name it */
};

/*
 * Reads a manifest from a descriptor to its end. Memory grows with the manifest.
 *
 * FIRN_OK; FIRN_NO_MEMORY; FIRN_IO; FIRN_BAD_DATA with fault->at the number of the line, from 1, and fault->what its
 * fault: a line that is no manifest line, a digest that is none of these, a path named twice with different digests.
 */
FIRN_API enum firn_status firn_expect_load(int descriptor, const struct firn_memory *memory, struct firn_fault *fault,
                                           struct firn_expect **out);
/* The same with a path; `-` is standard input. FIRN_NO_INPUT when it cannot be opened. */
FIRN_API enum firn_status firn_expect_open(const char *path, const struct firn_memory *memory, struct firn_fault *fault,
                                           struct firn_expect **out);
FIRN_API void firn_expect_free(struct firn_expect *expect);      /* takes NULL */

/* The digests to ask the intake for: enum firn_intake_digest, or'ed. */
FIRN_API unsigned firn_expect_digests(const struct firn_expect *expect);

/* Paths that the manifest lists. */
FIRN_API uint64_t firn_expect_count(const struct firn_expect *expect);

/*
 * Holds an item against the manifest and remembers that it was there.
 *
 * name           its stored name
 * operand_bytes  how much of the name is the operand's own: struct firn_intake_item tells it
 * others         the digests that were asked for; NULL when none were
 */
FIRN_API enum firn_expect_verdict firn_expect_see(struct firn_expect *expect, const char *name, size_t operand_bytes,
                                                  const uint8_t sha256[FIRN_ITEM_SHA256_BYTES],
                                                  const struct firn_intake_digests *others);

/*
 * The same for a hard link whose digest is not known: that of the item it leads to (a stored name) counts, if that was
 * seen to match. FIRN_EXPECT_UNLISTED also when the item it leads to gives no answer; a path that is listed stays
 * missing then.
 */
FIRN_API enum firn_expect_verdict firn_expect_see_link(struct firn_expect *expect, const char *name,
                                                       size_t operand_bytes, const char *target);

/* Calls missing for every listed path that no item was seen for, in the order of the manifest; returns how many. */
FIRN_API uint64_t firn_expect_missing(const struct firn_expect *expect, void (*missing)(void *self, const char *path),
                                      void *self);

#endif
