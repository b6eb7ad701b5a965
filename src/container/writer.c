/* container/writer.c - writing a container: windows are gathered, coded in threads, given out in order */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "firn/writer.h"

#include "base/bytes.h"
#include "base/fault.h"
#include "base/limits.h"
#include "base/memory.h"
#include "base/text.h"
#include "container/carried.h"
#include "container/digest.h"
#include "container/press.h"
#include "container/record.h"
#include "container/title.h"
#include "container/window.h"
#include "guard/hash.h"

#include <inttypes.h>

enum { COLOPHON_ROOM = 2048, COPY_BYTES = 1 << 16 };

struct firn_writer {
    struct firn_writer_options options;
    const struct firn_memory *memory;
    struct firn_fault *fault;
    struct firn_threads *threads;
    struct firn_press *press;
    struct firn_digest *digest;              /* of the item at hand */
    uint8_t *work;                           /* encoder work, one for each worker */
    struct firn_window windows[2];
    struct firn_window *filling, *coding;    /* coding: given to the threads, or NULL */
    uint64_t filling_serial;                 /* how often the filling window was turned */
    struct firn_item item;                   /* at hand; only numbers are kept */
    bool item_open;
    uint64_t item_serial;                    /* the filling window it began in */
    struct firn_window_mark item_mark;
    uint64_t item_stored, file_at;           /* stored bytes taken so far; where the next one belongs in the file */
    struct firn_item_extent *extents;        /* copy of the item's, for the zeros between them */
    size_t extent_capacity, extent;
    uint64_t content_at;                     /* end of content space so far */
    uint64_t next_item, parts, index_at;
    uint64_t spool_at;
    uint8_t *part;                           /* an INDEX body being made */
    size_t part_capacity;
    struct firn_writer_totals totals;
};

static bool should_stop(const struct firn_writer *writer)
{
    return writer->options.stop != NULL && writer->options.stop(writer->options.stop_self);
}

/* --- records --- */

static enum firn_status put_header(struct firn_writer *writer, enum firn_record_type type, uint64_t body_bytes)
{
    struct firn_record record = { .type = type, .at = firn_press_at(writer->press), .body_bytes = body_bytes };
    uint8_t header[FIRN_RECORD_HEADER_BYTES];

    firn_record_put(&record, header);
    return firn_press_put(writer->press, header, sizeof header, writer->fault);
}

static enum firn_status put_padding(struct firn_writer *writer, uint64_t body_bytes)
{
    uint64_t span = firn_record_span(body_bytes);

    return firn_press_put_zeros(writer->press, (size_t)(span - FIRN_RECORD_HEADER_BYTES - body_bytes), writer->fault);
}

static enum firn_status put_record(struct firn_writer *writer, enum firn_record_type type, const uint8_t *body,
                                   size_t body_bytes)
{
    enum firn_status status = put_header(writer, type, body_bytes);

    if (type == FIRN_RECORD_BATCH || type == FIRN_RECORD_SUMS)
        writer->totals.catalogue_bytes += firn_record_span(body_bytes);
    if (status == FIRN_OK)
        status = firn_press_put(writer->press, body, body_bytes, writer->fault);
    return status == FIRN_OK ? put_padding(writer, body_bytes) : status;
}

static enum firn_status put_segment(struct firn_writer *writer, const struct firn_window_cut *cut,
                                    struct firn_catalogue_place *place)
{
    uint8_t head[FIRN_CATALOGUE_SEGMENT_HEAD_BYTES];
    enum firn_status status;

    *place = (struct firn_catalogue_place){
        .content_at = cut->content_at, .at = firn_press_at(writer->press), .raw_bytes = (uint32_t)cut->raw_bytes,
        .body_bytes = (uint32_t)(sizeof head + cut->coded_bytes)
    };
    firn_catalogue_put_segment(place, cut->hash, head);
    status = put_header(writer, FIRN_RECORD_SEGMENT, place->body_bytes);
    if (status == FIRN_OK)
        status = firn_press_put(writer->press, head, sizeof head, writer->fault);
    if (status == FIRN_OK)
        status = firn_press_put(writer->press, cut->coded, cut->coded_bytes, writer->fault);
    writer->totals.segments++;
    writer->totals.coded_bytes += place->body_bytes;
    return status == FIRN_OK ? put_padding(writer, place->body_bytes) : status;
}

/* --- a window becomes a part of the catalogue --- */

/* Lays the pieces of a window's batch behind its head. */
static void make_batch(const struct firn_window *window, struct firn_catalogue_batch *batch, uint8_t *body)
{
    uint8_t *at = body + FIRN_CATALOGUE_BATCH_HEAD_BYTES;

    *batch = window->batch;
    batch->raw_bytes = (uint32_t)window->entries_used;
    for (size_t i = 0; i < window->piece_count; i++) {
        firn_bytes_put32(at, (uint32_t)window->pieces[i].coded_bytes);
        memcpy(at + 4, window->pieces[i].coded, window->pieces[i].coded_bytes);
        at += 4 + window->pieces[i].coded_bytes;
    }
    batch->coded_bytes = (size_t)(at - body) - FIRN_CATALOGUE_BATCH_HEAD_BYTES;
    firn_catalogue_seal_batch(batch, body);
}

/* Bytes that the INDEX body of a coded window takes. */
static size_t part_bytes(const struct firn_window *window)
{
    size_t bytes = FIRN_CATALOGUE_INDEX_HEAD_BYTES + FIRN_CATALOGUE_BATCH_HEAD_BYTES;

    for (size_t i = 0; i < window->piece_count; i++)
        bytes += 4 + window->pieces[i].coded_bytes;
    return bytes + window->sum_count * FIRN_CATALOGUE_SUM_BYTES + window->cut_count * FIRN_CATALOGUE_PLACE_BYTES
           + FIRN_CATALOGUE_SUMS_HEAD_BYTES;
}

static enum firn_status spool_part(struct firn_writer *writer, const struct firn_catalogue_index *index, uint8_t *body)
{
    struct firn_store *spool = writer->options.spool;
    size_t bytes = firn_catalogue_index_bytes(index);
    uint8_t length[8];
    int os_error = 0;
    enum firn_status status;

    firn_catalogue_put_index(index, body);
    firn_bytes_put64(length, bytes);
    status = spool->write_at(spool->self, writer->spool_at, length, sizeof length, &os_error);
    if (status == FIRN_OK)
        status = spool->write_at(spool->self, writer->spool_at + sizeof length, body, bytes, &os_error);
    if (status != FIRN_OK)
        return firn_fault_tell(writer->fault, status, os_error, writer->spool_at,
                               "the temporary file of the catalogue");
    writer->spool_at += sizeof length + bytes;
    return FIRN_OK;
}

static enum firn_status put_sums(struct firn_writer *writer, const struct firn_window *window, uint8_t *body,
                                 struct firn_catalogue_index *index)
{
    index->sums_at = firn_press_at(writer->press);
    index->sums_bytes = (uint32_t)(FIRN_CATALOGUE_SUMS_HEAD_BYTES + window->sum_count * FIRN_CATALOGUE_SUM_BYTES);
    firn_catalogue_put_sums(window->sums, (uint32_t)window->sum_count, body);
    memcpy(index->sums_seal, body, sizeof index->sums_seal);
    return put_record(writer, FIRN_RECORD_SUMS, body, index->sums_bytes);
}

/*
 * Gives out a coded window: BATCH, SEGMENTs, SUMS; and its INDEX body to the spool. The INDEX body is made in two
 * halves of one buffer: the parts it is put together from behind, the body in front.
 */
static enum firn_status give_out(struct firn_writer *writer, const struct firn_window *window)
{
    size_t room = part_bytes(window);
    void *part = writer->part;
    enum firn_status status = firn_memory_grow(writer->memory, &part, &writer->part_capacity, 2 * room, 1);
    struct firn_catalogue_index index = { .part = writer->parts, .at = firn_press_at(writer->press) };
    uint8_t *pieces, *at;

    writer->part = part;
    if (status != FIRN_OK)
        return status;
    at = pieces = writer->part + room;
    if (window->batch.items > 0) {
        struct firn_catalogue_batch batch;

        make_batch(window, &batch, at);
        index.batch = at;
        index.batch_bytes = (uint32_t)(FIRN_CATALOGUE_BATCH_HEAD_BYTES + batch.coded_bytes);
        status = put_record(writer, FIRN_RECORD_BATCH, at, index.batch_bytes);
        at += index.batch_bytes;
    }
    index.place_bytes = at;
    for (size_t i = 0; i < window->cut_count && status == FIRN_OK; i++) {
        struct firn_catalogue_place place;

        status = put_segment(writer, &window->cuts[i], &place);
        firn_catalogue_put_place(&place, at);
        at += FIRN_CATALOGUE_PLACE_BYTES;
        index.segments++;
    }
    if (window->sum_count > 0 && status == FIRN_OK)
        status = put_sums(writer, window, at, &index);
    if (status != FIRN_OK)
        return status;
    index.end = firn_press_at(writer->press);
    writer->parts++;
    return spool_part(writer, &index, writer->part);
}

static void code_job(void *self, size_t index, unsigned worker)
{
    struct firn_writer *writer = self;

    firn_window_code(writer->coding, index, writer->options.effort,
                     writer->work + worker * firn_window_work_bytes());
}

/* Waits for the window that is being coded, and gives it out. */
static enum firn_status settle(struct firn_writer *writer)
{
    struct firn_window *window = writer->coding;

    if (window == NULL)
        return FIRN_OK;
    firn_threads_wait(writer->threads);
    writer->coding = NULL;
    return give_out(writer, window);
}

/*
 * The filling window goes to the threads, the other one becomes the filling one. The open cut goes along when it
 * belongs to the open item alone, so that a large file is cut every 1 MiB wherever the windows end.
 */
static enum firn_status turn(struct firn_writer *writer)
{
    struct firn_window *full = writer->filling;
    struct firn_window *other = full == &writer->windows[0] ? &writer->windows[1] : &writer->windows[0];
    enum firn_status status = settle(writer);

    if (status != FIRN_OK)
        return status;
    if (should_stop(writer))
        return FIRN_STOPPED;
    firn_window_clear(other);
    other->cut_content_at = full->cut_content_at + (full->raw_used - full->cut_from);
    if (writer->item_open && full->cut_content_at >= writer->item.content_at)
        firn_window_carry(full, other);
    writer->filling = other;
    writer->filling_serial++;
    writer->coding = full;
    firn_threads_start(writer->threads, code_job, writer, firn_window_close(full));
    return FIRN_OK;
}

/* --- making and freeing --- */

static enum firn_status make_rooms(struct firn_writer *writer, const uint8_t *page)
{
    const struct firn_writer_options *options = &writer->options;
    struct firn_press_options press;
    enum firn_status status = firn_threads_make(writer->memory, options->threads, &writer->threads);

    if (status != FIRN_OK)
        return status;
    press = (struct firn_press_options){
        .store = options->store, .memory = writer->memory, .threads = writer->threads, .geometry = options->geometry,
        .nonce = options->nonce, .page = page
    };
    status = firn_press_make(&press, &writer->press);
    if (status == FIRN_OK)
        status = firn_digest_make(&writer->digest);
    for (size_t i = 0; i < 2 && status == FIRN_OK; i++)
        status = firn_window_make(writer->memory, &writer->windows[i]);
    if (status != FIRN_OK)
        return status;
    writer->work = writer->memory->get(writer->memory->self, options->threads * firn_window_work_bytes());
    return writer->work == NULL ? FIRN_NO_MEMORY : FIRN_OK;
}

/* What a stranger needs comes first, as plain text, where the title page says it is. */
static enum firn_status put_texts(struct firn_writer *writer)
{
    enum firn_status status = put_record(writer, FIRN_RECORD_SPEC, firn_carried_specification,
                                         firn_carried_specification_bytes);

    if (status == FIRN_OK)
        status = put_record(writer, FIRN_RECORD_READER, firn_carried_reader, firn_carried_reader_bytes);
    return status;
}

enum firn_status firn_writer_make(const struct firn_writer_options *options, struct firn_fault *fault,
                                  struct firn_writer **out)
{
    const struct firn_title_texts texts = { firn_carried_specification_bytes, firn_carried_reader_bytes };
    uint8_t page[FIRN_TITLE_PAGE_BYTES];
    const char *wrong = "the sheet";
    struct firn_writer *writer;
    enum firn_status status;

    *out = NULL;
    if (!firn_sheet_geometry_valid(&options->geometry))
        return firn_fault_tell(fault, FIRN_BAD_ARGUMENT, 0, 0, wrong);
    status = firn_title_write(&options->title, &options->geometry, options->carry_reader ? &texts : NULL, page, &wrong);
    if (status != FIRN_OK)
        return firn_fault_tell(fault, status, 0, 0, wrong);
    writer = firn_memory_get_zeroed(options->memory, 1, sizeof *writer);
    if (writer == NULL)
        return firn_fault_tell(fault, FIRN_NO_MEMORY, 0, 0, "the writer");
    writer->options = *options;
    writer->options.title = (struct firn_writer_title){ .date = 0 };      /* lent for this call only */
    writer->memory = options->memory;
    writer->fault = fault;
    status = make_rooms(writer, page);
    if (status == FIRN_OK) {
        writer->filling = &writer->windows[0];
        status = put_record(writer, FIRN_RECORD_TITLE, page, sizeof page);
        if (status == FIRN_OK && options->carry_reader)
            status = put_texts(writer);
    }
    if (status != FIRN_OK) {
        firn_writer_free(writer);
        return firn_fault_tell(fault, status, 0, 0, "the writer");
    }
    *out = writer;
    return FIRN_OK;
}

void firn_writer_free(struct firn_writer *writer)
{
    const struct firn_memory *memory;

    if (writer == NULL)
        return;
    memory = writer->memory;
    firn_threads_free(writer->threads);      /* first: its jobs use all the rest */
    firn_press_free(writer->press);
    firn_digest_free(writer->digest);
    firn_window_free(&writer->windows[0]);
    firn_window_free(&writer->windows[1]);
    memory->put(memory->self, writer->work);
    memory->put(memory->self, writer->extents);
    memory->put(memory->self, writer->part);
    memory->put(memory->self, writer);
}

/* --- items --- */

static enum firn_status keep_extents(struct firn_writer *writer, const struct firn_item *item)
{
    void *extents = writer->extents;
    enum firn_status status = firn_memory_grow(writer->memory, &extents, &writer->extent_capacity,
                                               item->extent_count + 1, sizeof *writer->extents);

    writer->extents = extents;
    if (status != FIRN_OK)
        return status;
    writer->item.stored_bytes = 0;
    for (size_t i = 0; i < item->extent_count; i++) {
        writer->extents[i] = item->extents[i];
        writer->item.stored_bytes += item->extents[i].bytes;
    }
    writer->extent = 0;
    return FIRN_OK;
}

/* A small item shares the open segment with its neighbours when it fits into it and follows them in content space. */
static bool shares_segment(const struct firn_writer *writer)
{
    const struct firn_window *window = writer->filling;
    size_t open = window->raw_used - window->cut_from;

    return writer->item.stored_bytes < FIRN_WINDOW_LARGE_BYTES && window->cut_content_at + open == writer->content_at &&
           open + writer->item.stored_bytes <= FIRN_SEGMENT_RAW_MAX;
}

enum firn_status firn_writer_item(struct firn_writer *writer, const struct firn_item *item)
{
    size_t entry = firn_catalogue_entry_bytes(item);
    struct firn_item entered = *item;
    enum firn_status status;

    if (writer->item_open)
        return firn_fault_tell(writer->fault, FIRN_BAD_ARGUMENT, 0, 0, "an item inside an item");
    if (entry == 0 || entry > FIRN_LIMIT_ENTRY_BYTES)
        return firn_fault_tell(writer->fault, FIRN_OVER_LIMIT, 0, 0, "the catalogue entry of an item");
    if (firn_window_full(writer->filling)) {
        status = turn(writer);
        if (status != FIRN_OK)
            return status;
    }
    status = keep_extents(writer, item);
    if (status != FIRN_OK)
        return firn_fault_tell(writer->fault, status, 0, 0, "the extents of an item");
    writer->item.has_content = item->has_content;
    writer->item.bytes = item->bytes;
    writer->item.number = writer->next_item;
    writer->item.content_at = writer->content_at;
    writer->item_open = true;
    writer->item_serial = writer->filling_serial;
    writer->item_stored = writer->file_at = 0;
    firn_window_mark(writer->filling, &writer->item_mark);
    if (!shares_segment(writer))
        firn_window_cut_here(writer->filling, writer->content_at);
    if (writer->item.has_content)
        firn_digest_start(writer->digest);
    entered.number = writer->next_item;
    entered.content_at = writer->content_at;
    firn_window_add_entry(writer->filling, &entered);
    return FIRN_OK;
}

/* Feeds the digest: stored bytes, and zeros for the holes before them. */
static void digest_stored(struct firn_writer *writer, const uint8_t *bytes, size_t count)
{
    while (count > 0) {
        const struct firn_item_extent *extent = &writer->extents[writer->extent];
        uint64_t end = extent->at + extent->bytes;
        size_t step;

        if (writer->file_at < extent->at) {
            firn_digest_add_zeros(writer->digest, extent->at - writer->file_at);
            writer->file_at = extent->at;
        }
        step = count < end - writer->file_at ? count : (size_t)(end - writer->file_at);
        firn_digest_add(writer->digest, bytes, step);
        writer->file_at += step;
        if (writer->file_at == end)
            writer->extent++;
        bytes += step;
        count -= step;
    }
}

enum firn_status firn_writer_content(struct firn_writer *writer, const uint8_t *bytes, size_t count)
{
    if (!writer->item_open || count > writer->item.stored_bytes - writer->item_stored)
        return firn_fault_tell(writer->fault, FIRN_BAD_ARGUMENT, 0, 0, "more content than was announced");
    digest_stored(writer, bytes, count);
    while (count > 0) {
        size_t added = firn_window_add_content(writer->filling, bytes, count);

        writer->item_stored += added;
        bytes += added;
        count -= added;
        if (count > 0) {
            enum firn_status status = turn(writer);

            if (status != FIRN_OK)
                return status;
        }
    }
    return FIRN_OK;
}

/* After a large item, the next one does not share its last segment. */
static void leave_item(struct firn_writer *writer)
{
    writer->content_at += writer->item.stored_bytes;
    if (writer->item.stored_bytes >= FIRN_WINDOW_LARGE_BYTES)
        firn_window_cut_here(writer->filling, writer->content_at);
    writer->next_item++;
    writer->item_open = false;
    writer->totals.items++;
}

enum firn_status firn_writer_end(struct firn_writer *writer, uint8_t *sha256)
{
    struct firn_catalogue_sum sum = { .item = writer->item.number };
    enum firn_status status = FIRN_OK;

    if (!writer->item_open || writer->item_stored != writer->item.stored_bytes)
        return firn_fault_tell(writer->fault, FIRN_BAD_ARGUMENT, 0, 0, "less content than was announced");
    if (writer->item.has_content) {
        firn_digest_add_zeros(writer->digest, writer->item.bytes - writer->file_at);
        firn_digest_finish(writer->digest, sum.sha256);
        if (sha256 != NULL)
            memcpy(sha256, sum.sha256, sizeof sum.sha256);
        status = firn_window_add_sum(writer->filling, &sum);
        writer->totals.content_bytes += writer->item.bytes;
        writer->totals.stored_bytes += writer->item.stored_bytes;
    }
    if (writer->item_serial == writer->filling_serial)
        firn_window_item_whole(writer->filling, (size_t)writer->item.stored_bytes);
    leave_item(writer);
    return status == FIRN_OK ? FIRN_OK : firn_fault_tell(writer->fault, status, 0, 0, "the digests of items");
}

enum firn_status firn_writer_withdraw(struct firn_writer *writer, bool *traceless)
{
    if (!writer->item_open)
        return firn_fault_tell(writer->fault, FIRN_BAD_ARGUMENT, 0, 0, "no item to withdraw");
    *traceless = writer->item_serial == writer->filling_serial;
    if (*traceless) {
        firn_window_return(writer->filling, &writer->item_mark);
        writer->item_open = false;
        return FIRN_OK;
    }
    /* The place announced for its content stays empty, so no reader can take it for whole. */
    writer->filling->raw_used = writer->filling->cut_from;
    writer->totals.withdrawn++;
    leave_item(writer);
    firn_window_cut_here(writer->filling, writer->content_at);
    return FIRN_OK;
}

/* --- the end --- */

/* Copies the spooled INDEX bodies out, and digests them. */
static enum firn_status put_index(struct firn_writer *writer)
{
    struct firn_store *spool = writer->options.spool;
    uint64_t from = 0;
    enum firn_status status = FIRN_OK;
    uint8_t length[8];
    int os_error = 0;
    size_t got;

    firn_digest_start(writer->digest);
    writer->index_at = firn_press_at(writer->press);
    while (from < writer->spool_at && status == FIRN_OK) {
        uint64_t bytes, left;

        status = spool->read_at(spool->self, from, length, sizeof length, &got, &os_error);
        if (status != FIRN_OK || got < sizeof length)
            return firn_fault_tell(writer->fault, FIRN_IO, os_error, from, "the temporary file of the catalogue");
        from += sizeof length;
        bytes = left = firn_bytes_get64(length);
        writer->totals.catalogue_bytes += firn_record_span(bytes);
        status = put_header(writer, FIRN_RECORD_INDEX, bytes);
        while (left > 0 && status == FIRN_OK) {
            uint8_t copy[COPY_BYTES];
            size_t step = left < sizeof copy ? (size_t)left : sizeof copy;

            status = spool->read_at(spool->self, from, copy, step, &got, &os_error);
            if (status != FIRN_OK || got < step)
                return firn_fault_tell(writer->fault, FIRN_IO, os_error, from, "the temporary file of the catalogue");
            firn_digest_add(writer->digest, copy, step);
            status = firn_press_put(writer->press, copy, step, writer->fault);
            from += step;
            left -= step;
        }
        if (status == FIRN_OK)
            status = put_padding(writer, bytes);
    }
    firn_digest_finish(writer->digest, writer->totals.catalogue_sha256);
    return status;
}

static enum firn_status put_colophon(struct firn_writer *writer)
{
    const struct firn_writer_totals *t = &writer->totals;
    uint8_t hash[FIRN_HASH_BYTES];
    char words[COLOPHON_ROOM];
    struct firn_text text;

    firn_text_start(&text, words, sizeof words);
    firn_text_add(&text, "firn colophon, format 1\n"
        "items: %" PRIu64 "\nwithdrawn: %" PRIu64 "\ncontent-bytes: %" PRIu64 "\nstored-bytes: %" PRIu64
        "\nsegments: %" PRIu64 "\nsegment-bytes: %" PRIu64 "\nparts: %" PRIu64 "\ntitle-at: 0\nindex-at: %" PRIu64
        "\ncatalogue-sha256: ", t->items, t->withdrawn, t->content_bytes, t->stored_bytes, t->segments, t->coded_bytes,
        writer->parts, writer->index_at);
    firn_text_add_hex(&text, t->catalogue_sha256, sizeof t->catalogue_sha256);
    firn_text_add(&text, "\nxxh3-128-of-the-above: ");
    firn_hash_put((const uint8_t *)words, text.used, hash);
    firn_text_add_hex(&text, hash, sizeof hash);
    firn_text_add(&text, "\n");
    return put_record(writer, FIRN_RECORD_COLOPHON, (const uint8_t *)words, text.used);
}

enum firn_status firn_writer_finish(struct firn_writer *writer, struct firn_writer_totals *totals)
{
    struct firn_press_totals press;
    enum firn_status status = FIRN_OK;

    if (writer->item_open)
        return firn_fault_tell(writer->fault, FIRN_BAD_ARGUMENT, 0, 0, "an item that was not ended");
    if (!firn_window_empty(writer->filling))
        status = turn(writer);
    if (status == FIRN_OK)
        status = settle(writer);
    if (status == FIRN_OK)
        status = put_index(writer);
    if (status == FIRN_OK)
        status = put_colophon(writer);
    if (status == FIRN_OK)
        status = firn_press_finish(writer->press, writer->fault, &press);
    if (status != FIRN_OK)
        return status;
    writer->totals.blocks = press.blocks;
    writer->totals.data_blocks = press.data_blocks;
    writer->totals.container_bytes = press.container_bytes;
    memcpy(writer->totals.id, press.id, sizeof press.id);
    *totals = writer->totals;
    return FIRN_OK;
}
