/*
 * container/sheets.h - the blocks of a container in its store, judged, mended, rebuilt
 *
 * Room: container. Used by the reader (stream by stream) and by care (sheet by sheet). Finds the layout from any one
 * good block, else from what the tags of all blocks have in common; the title page is in the first 4096 bytes, block
 * n at 4096 * (n + 1).
 *
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_CONTAINER_SHEETS_H
#define FIRN_CONTAINER_SHEETS_H

#include "firn/block.h"
#include "firn/reader.h"
#include "firn/store.h"

struct firn_sheets;

struct firn_sheets_options {
    struct firn_store *store;
    const struct firn_memory *memory;
    unsigned threads;
    bool (*stop)(void *self);
    void *stop_self;
};

/* What one block was found to be. */
enum firn_sheets_finding {
    FIRN_SHEETS_SOUND,
    FIRN_SHEETS_MENDED,          /* by its own lanes, deep repair included; the good bytes are in memory */
    FIRN_SHEETS_REBUILT,         /* from the reserve, column rescue included; the good bytes are in memory */
    FIRN_SHEETS_LOST
};

/* FIRN_OK, FIRN_NOT_CONTAINER, FIRN_FOREIGN_FORMAT, FIRN_NO_MEMORY, FIRN_IO, FIRN_STOPPED, FIRN_BUSY */
enum firn_status firn_sheets_open(const struct firn_sheets_options *options, struct firn_fault *fault,
                                  struct firn_sheets **out);
void firn_sheets_close(struct firn_sheets *sheets);      /* takes NULL */

/* The fields that blocks alone tell: up to end_known; the rest is zero. */
const struct firn_reader_layout *firn_sheets_layout(const struct firn_sheets *sheets);
void firn_sheets_damage(const struct firn_sheets *sheets, struct firn_reader_damage *damage);

/* Where block `number` lies in the file. */
uint64_t firn_sheets_place(uint64_t number);

/* Shape and first block of sheet `index`, 0 .. layout->sheets - 1. */
void firn_sheets_shape(const struct firn_sheets *sheets, uint64_t index, struct firn_sheet_shape *shape,
                       uint64_t *first_block);

/* Bytes of the stream: data blocks times payload. */
uint64_t firn_sheets_stream_bytes(const struct firn_sheets *sheets);

/*
 * Reads stream[at .. at + count), mending and rebuilding as needed.
 *
 * FIRN_OK    all bytes are good
 * FIRN_LOST  some are not: bytes[0 .. *good) are, and the stream can be read again from *resume on (the next block that
 *            is not lost may lie further still). *container_at is the file offset of the first lost block.
 * FIRN_END   at + count is beyond the stream
 * else       FIRN_IO never: what cannot be read is lost. FIRN_NO_MEMORY, FIRN_STOPPED.
 */
struct firn_sheets_gap { size_t good; uint64_t resume; uint64_t container_at; };
enum firn_status firn_sheets_read(struct firn_sheets *sheets, uint64_t at, uint8_t *bytes, size_t count,
                                  struct firn_sheets_gap *gap);

/*
 * Checks every block of a sheet as scrub does (hash and lanes) in one pass that keeps nothing. *clean is true when
 * every block is there and sound, guard words included. FIRN_OK, FIRN_STOPPED.
 */
enum firn_status firn_sheets_check(struct firn_sheets *sheets, uint64_t index, bool *clean);

/*
 * Reads a whole sheet into memory, mends and rebuilds it, and lends it until the next call on these sheets.
 *
 * blocks    out  shape.data_blocks + shape.reserve_blocks blocks in order
 * findings  out  what each was found to be; the block at a LOST place is undefined
 * missing   out  how many of them were beyond the end of the file or unreadable
 *
 * FIRN_OK, FIRN_NO_MEMORY, FIRN_STOPPED.
 */
enum firn_status firn_sheets_mend(struct firn_sheets *sheets, uint64_t index, const uint8_t **blocks,
                                  const enum firn_sheets_finding **findings, uint32_t *missing);

#endif
