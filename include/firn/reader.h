/*
 * firn/reader.h - reading a container: its layout, its items, their content, repaired on the way
 *
 * Room: container. Nothing is handed out as good unless a 128-bit hash of exactly those bytes says so. Damaged blocks
 * are mended from themselves, else rebuilt from their sheet, even where no block of it is intact any more, else told
 * of as lost. The container is never written to. Memory is bounded by one sheet, a few segments, 8 MiB of good blocks
 * that are kept when another sheet is loaded, and 2.6 MiB for each thread while a sheet is mended that has more damage
 * than its reserve was made for.
 *
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_READER_H
#define FIRN_READER_H

#include "firn/item.h"
#include "firn/sheet.h"
#include "firn/store.h"

struct firn_reader;

struct firn_reader_options {
    struct firn_store *store;          /* lent until free */
    const struct firn_memory *memory;
    unsigned threads;
    bool (*stop)(void *self);          /* may be NULL */
    void *stop_self;
};

struct firn_reader_layout {
    struct firn_sheet_geometry geometry;
    uint8_t id[8];
    uint64_t file_bytes;
    uint64_t blocks;              /* that the container has, as far as its tags tell */
    uint64_t blocks_missing;      /* of these, beyond the end of the file */
    uint64_t foreign_bytes;       /* behind the last block, or a broken piece of a block */
    uint64_t data_blocks;
    uint64_t sheets;
    struct firn_sheet_shape last_sheet;
    bool end_known;               /* false: the last sheets are gone, so nobody knows how much there was */
    bool title_sound;             /* page 0 is as the TITLE record has it */
    bool colophon_found;
    /* from the colophon; 0 when it is gone */
    uint64_t items, withdrawn, content_bytes, stored_bytes, coded_bytes, segments;
    uint8_t catalogue_sha256[FIRN_ITEM_SHA256_BYTES];
};

/* What became of the blocks that were read so far; each block counts once. */
struct firn_reader_damage {
    uint64_t blocks_read;
    uint64_t mended;              /* by their own lanes */
    uint64_t rebuilt;             /* from the reserve */
    uint64_t lost;
    uint64_t unreadable;          /* of all these: the medium gave an error or the file ended */
};

/* FIRN_OK, FIRN_NOT_CONTAINER, FIRN_FOREIGN_FORMAT, FIRN_NO_MEMORY, FIRN_IO, FIRN_STOPPED, FIRN_BUSY. */
FIRN_API enum firn_status firn_reader_open(const struct firn_reader_options *options, struct firn_fault *fault,
                                           struct firn_reader **out);
FIRN_API void firn_reader_free(struct firn_reader *reader);      /* takes NULL */

FIRN_API const struct firn_reader_layout *firn_reader_layout_of(const struct firn_reader *reader);
FIRN_API void firn_reader_damage_so_far(const struct firn_reader *reader, struct firn_reader_damage *damage);

/*
 * The title page (4096 bytes) from its protected copy, else from page 0. FIRN_OK, or FIRN_LOST when only page 0 is
 * there.
 */
FIRN_API enum firn_status firn_reader_title_page(struct firn_reader *reader, uint8_t page[4096]);

/*
 * The layout of blocks, rows and records in words, as the title page has it: lines of at most 80 columns in words[0 ..
 * room), ended by a NUL. FIRN_READER_LAYOUT_ROOM is enough.
 */
enum { FIRN_READER_LAYOUT_ROOM = 4096 };
FIRN_API void firn_reader_layout_words(const struct firn_reader_layout *layout, char *words, size_t room);

/* The two texts that a container carries for those who have no firn. */
enum firn_reader_text { FIRN_READER_TEXT_SPECIFICATION, FIRN_READER_TEXT_SOURCE };

/* Takes the next bytes of a text; bytes is NULL for a stretch that is lost. */
typedef enum firn_status (firn_reader_text_taker)(void *self, const uint8_t *bytes, size_t count);

/*
 * Gives one of the texts, piece after piece. Needs neither index nor catalogue.
 *
 * FIRN_OK; FIRN_END when the container carries none; FIRN_LOST when some of it is lost (what there is was given) or no
 * record of it can be found where records are lost; FIRN_NO_MEMORY, FIRN_STOPPED; else what take returned.
 */
FIRN_API enum firn_status firn_reader_text(struct firn_reader *reader, enum firn_reader_text which,
                                           firn_reader_text_taker *take, void *self);

/* Why a stretch of an item is missing. */
enum firn_reader_loss {
    FIRN_READER_LOSS_BLOCKS,      /* blocks of its segment are lost */
    FIRN_READER_LOSS_WITHDRAWN,   /* never written: the source could not be read when the container was made */
    FIRN_READER_LOSS_CONTENT      /* the segment's bytes do not satisfy its hash, or cannot be decoded */
};

/* How an item came out. */
struct firn_reader_outcome {
    uint64_t lost_bytes;          /* of its stored bytes */
    bool sum_known, sum_right;    /* SHA-256 of the whole against the catalogue; right only if lost_bytes is 0 */
    uint8_t sha256[FIRN_ITEM_SHA256_BYTES];     /* of the bytes handed out, when lost_bytes is 0 */
};

/*
 * What firn_reader_walk calls, in the order of the catalogue. The item lent to a call lives for that call only, but its
 * number identifies it. Any status but FIRN_OK from begin, bytes, gap or end ends the walk with that status; a fault
 * that the visitor has filled in then stays as it is.
 */
struct firn_reader_visitor {
    void *self;
    /* Whether begin .. end shall be called for this item. NULL: for all. With foresight files are asked for twice. */
    bool (*wants)(void *self, const struct firn_item *item);
    /* foreseen_lost_bytes  with foresight: how much of the content cannot be had; else 0 */
    enum firn_status (*begin)(void *self, const struct firn_item *item, uint64_t foreseen_lost_bytes);
    /* Good bytes at `at` of the file; ascending; holes are not called for. NULL: content is not needed, nor read. */
    enum firn_status (*bytes)(void *self, const struct firn_item *item, uint64_t at, const uint8_t *bytes,
                              size_t count);
    /*
     * Bytes at `at` of the file that are lost, and where on the medium: the file offset of the first block concerned.
     */
    enum firn_status (*gap)(void *self, const struct firn_item *item, uint64_t at, uint64_t count,
                            enum firn_reader_loss why, uint64_t container_at);
    enum firn_status (*end)(void *self, const struct firn_item *item, const struct firn_reader_outcome *outcome);
    /*
     * Told before the calls of gap for one lost stretch of content: the first and the last block that is lost of it,
     * and how many of those from the first to the last are; 0, 0, 0 when nobody knows. May be NULL.
     */
    void (*lost_blocks)(void *self, uint64_t first, uint64_t last, uint64_t count);
    /*
     * Asks to know at begin whether all content can be had, at the price of reading it twice: for outputs that cannot
     * take a beginning back.
     */
    bool foresight;
    /* Asks for the digests of items where no content is asked for: they stand apart from the list of items. */
    bool digests;
};

struct firn_reader_walk_report {
    uint64_t items;               /* met in the catalogue */
    uint64_t items_unknown;       /* the colophon counts them, but their catalogue entries are gone */
    uint64_t index_parts_lost;    /* parts of the catalogue that were put together from the stream instead */
    bool cut_short;               /* the end of the container is gone, so there may have been more items */
};

/*
 * Goes through the catalogue from the start. FIRN_OK also when items are damaged or unknown: the visitor and report
 * tell.
 */
FIRN_API enum firn_status firn_reader_walk(struct firn_reader *reader, const struct firn_reader_visitor *visitor,
                                           struct firn_fault *fault, struct firn_reader_walk_report *report);

/* A coded stretch of content; pointers are lent for the call. */
struct firn_reader_segment {
    uint64_t content_at;          /* in content space */
    uint64_t stream_at;           /* of its record */
    const uint8_t *raw, *coded;   /* NULL when it is lost */
    size_t raw_bytes, coded_bytes;
};

typedef enum firn_status (firn_reader_segment_teller)(void *self, const struct firn_reader_segment *segment);

/* Goes through all segments in order, for those who want to see the codes. Any status but FIRN_OK from tell ends it. */
FIRN_API enum firn_status firn_reader_segments(struct firn_reader *reader, firn_reader_segment_teller *tell, void *self,
                                               struct firn_fault *fault);

#endif
