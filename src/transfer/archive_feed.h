/*
 * transfer/archive_feed.h - an archive on its way through libarchive
 *
 * Room: transfer. From a file, or from a pipe; formats that have to be searched are copied from a pipe to a temporary
 * file first. Only what this process can read by itself is unpacked: no filter that starts a program, no format that
 * opens files by name.
 *
 * libarchive turns names into the charset of the thread's locale, and composes letters on the way (NFC), so that names
 * come out changed. Formats whose names are bytes (tar, cpio, ar, lha) are therefore read in the C locale, where it
 * leaves bytes beyond ASCII as they are; those with names in Unicode are read in C.UTF-8.
 *
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_TRANSFER_ARCHIVE_FEED_H
#define FIRN_TRANSFER_ARCHIVE_FEED_H

#include "firn/store.h"

#include <archive.h>
#include <archive_entry.h>

struct firn_archive_feed;

/*
 * Opens path (`-`: standard input).
 *
 * stop  may be NULL. Asked whenever a signal has interrupted a read, since a pipe may be silent for long; true makes
 *       that read fail with EINTR.
 *
 * FIRN_OK, FIRN_NO_INPUT, FIRN_NO_MEMORY, FIRN_IO, FIRN_CANNOT_CREATE (the temporary file), FIRN_BAD_DATA: no archive.
 */
enum firn_status firn_archive_feed_open(const char *path, bool (*stop)(void *self), void *self,
                                        const struct firn_memory *memory, struct firn_fault *fault,
                                        struct firn_archive_feed **out);
void firn_archive_feed_close(struct firn_archive_feed *feed);      /* takes NULL */

/*
 * The next entry, lent until the next call; it may be changed. Returns what archive_read_next_header returns.
 * Its strings are asked for between enter and leave.
 */
int firn_archive_feed_next(struct firn_archive_feed *feed, struct archive_entry **entry);

/* The locale that suits the archive. Nest nothing. */
void firn_archive_feed_enter(struct firn_archive_feed *feed);
void firn_archive_feed_leave(struct firn_archive_feed *feed);

/* Lent until close, for reading data and asking about the archive. */
struct archive *firn_archive_feed_archive(struct firn_archive_feed *feed);

/* The family of formats it is of, ARCHIVE_FORMAT_TAR and so on. */
int firn_archive_feed_family(struct firn_archive_feed *feed);

/* The errno of a failed read of the input, or 0: whether trouble is the medium's or the archive's. */
int firn_archive_feed_error(const struct firn_archive_feed *feed);

/* At the end of an archive: false for a bare tar archive whose last record that was read is no end mark. */
bool firn_archive_feed_ended_well(struct firn_archive_feed *feed);

#endif
