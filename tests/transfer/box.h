/*
 * tests/transfer/box.h - a real container in a temporary file, packed and given back through the transfer room
 *
 * What is told on the way is written down, so that a test can compare it with what it expects.
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_TESTS_BOX_H
#define FIRN_TESTS_BOX_H

#include "firn/intake.h"
#include "firn/outlet.h"
#include "firn/reader.h"

enum { BOX_NOTES_ROOM = 1 << 16 };

struct box {
    const struct firn_memory *memory;
    struct firn_store store, spool;
    struct firn_writer *writer;
    struct firn_reader *reader;
    struct firn_writer_totals totals;
    struct firn_fault fault;
    struct firn_intake_options intake;         /* set up to write to notes */
    struct firn_intake_report taken;
    struct firn_outlet_options outlet;         /* likewise */
    struct firn_outlet_report given;
    char notes[BOX_NOTES_ROOM];                /* "kind path[ (detail)]\n" of each finding */
    char items[BOX_NOTES_ROOM];                /* "name[ -> link]\n" of each item that was stored */
    uint8_t sha256[FIRN_ITEM_SHA256_BYTES];    /* of the item stored last, if it had one */
};

/*
 * A writer without reserve, so that any damage is loss; stops the test program when that fails. memory NULL: the
 * system's.
 */
struct box *box_make(const struct firn_memory *memory);
void box_free(struct box *box);

/* Finishes the writer and opens a reader. */
enum firn_status box_close_lid(struct box *box);

/* Opens a reader again, after the container was changed. */
enum firn_status box_open_again(struct box *box);

enum firn_status box_take_path(struct box *box, const char *path);
enum firn_status box_take_archive(struct box *box, const char *path);

/* One item with a header and content of the test's own making, whatever it is. */
void box_put(struct box *box, const uint8_t *pax, size_t pax_bytes, bool has_content, const void *bytes, size_t count);

/* Clears notes, then gives back. */
enum firn_status box_give_folder(struct box *box, const char *folder);
enum firn_status box_give_tar(struct box *box, const char *path);

/* Wipes whole blocks of the container with zeros. */
void box_wipe(struct box *box, uint64_t first_block, uint64_t blocks);

/* "name type mode\n" of each item, in order; for the caller to free. */
char *box_list(struct box *box);

#endif
