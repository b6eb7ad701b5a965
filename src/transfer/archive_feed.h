/*
 * transfer/archive_feed.h - the bytes of an archive on their way to libarchive
 *
 * Room: transfer. From a file, or from a pipe; a zip or 7-Zip archive that comes through a pipe is copied to a
 * temporary file first. Only what this process can read by itself is unpacked: no filter that starts a program, no
 * format that opens files by name.
 *
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_TRANSFER_ARCHIVE_FEED_H
#define FIRN_TRANSFER_ARCHIVE_FEED_H

#include "firn/store.h"

#include <archive.h>

struct firn_archive_feed;

/*
 * Opens path (`-`: standard input) and starts reading it.
 * FIRN_OK, FIRN_NO_INPUT, FIRN_NO_MEMORY, FIRN_IO, FIRN_CANNOT_CREATE (the temporary file), FIRN_BAD_DATA: no archive.
 */
enum firn_status firn_archive_feed_open(const char *path, const struct firn_memory *memory, struct firn_fault *fault,
                                        struct firn_archive_feed **out);
void firn_archive_feed_close(struct firn_archive_feed *feed);      /* takes NULL */

/* Lent until close. */
struct archive *firn_archive_feed_archive(struct firn_archive_feed *feed);

/* The errno of a failed read of the input, or 0: whether trouble is the medium's or the archive's. */
int firn_archive_feed_error(const struct firn_archive_feed *feed);

/* At the end of an archive: false for a bare tar archive whose last record that was read is no end mark. */
bool firn_archive_feed_ended_well(struct firn_archive_feed *feed);

#endif
