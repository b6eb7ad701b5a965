/* container/reader.c - reading a container: sheets, parts, decoder and walk under one roof */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "firn/reader.h"

#include "base/fault.h"
#include "base/memory.h"
#include "container/title.h"
#include "container/walk.h"

struct firn_reader {
    struct firn_reader_options options;
    const struct firn_memory *memory;
    struct firn_sheets *sheets;
    struct firn_parts *parts;
    struct firn_decoder *decoder;
    struct firn_reader_layout layout;
};

static void fill_layout(struct firn_reader *reader)
{
    const struct firn_parts_colophon *colophon = firn_parts_colophon_of(reader->parts);
    struct firn_reader_layout *layout = &reader->layout;
    uint8_t sound[FIRN_TITLE_PAGE_BYTES], page[FIRN_TITLE_PAGE_BYTES];
    struct firn_store *store = reader->options.store;
    size_t got = 0;
    int os_error = 0;

    *layout = *firn_sheets_layout(reader->sheets);
    layout->title_sound = firn_reader_title_page(reader, sound) == FIRN_OK &&
                          store->read_at(store->self, 0, page, sizeof page, &got, &os_error) == FIRN_OK &&
                          got == sizeof page && memcmp(page, sound, sizeof page) == 0;
    layout->colophon_found = colophon->found;
    layout->end_known = layout->end_known || colophon->found;
    layout->items = colophon->items;
    layout->withdrawn = colophon->withdrawn;
    layout->content_bytes = colophon->content_bytes;
    layout->stored_bytes = colophon->stored_bytes;
    layout->coded_bytes = colophon->coded_bytes;
    layout->segments = colophon->segments;
    memcpy(layout->catalogue_sha256, colophon->catalogue_sha256, sizeof layout->catalogue_sha256);
}

enum firn_status firn_reader_open(const struct firn_reader_options *options, struct firn_fault *fault,
                                  struct firn_reader **out)
{
    struct firn_reader *reader = firn_memory_get_zeroed(options->memory, 1, sizeof *reader);
    struct firn_sheets_options sheets = {
        .store = options->store, .memory = options->memory, .threads = options->threads, .stop = options->stop,
        .stop_self = options->stop_self
    };
    enum firn_status status;

    *out = NULL;
    if (reader == NULL)
        return firn_fault_tell(fault, FIRN_NO_MEMORY, 0, 0, "the reader");
    reader->options = *options;
    reader->memory = options->memory;
    status = firn_sheets_open(&sheets, fault, &reader->sheets);
    if (status == FIRN_OK) {
        status = firn_parts_open(reader->sheets, reader->memory, &reader->parts);
        if (status == FIRN_OK)
            status = firn_decoder_make(reader->sheets, reader->memory, options->threads, &reader->decoder);
        if (status != FIRN_OK)
            firn_fault_tell(fault, status, 0, 0, "the reader");
    }
    if (status != FIRN_OK) {
        firn_reader_free(reader);
        return status;
    }
    fill_layout(reader);
    *out = reader;
    return FIRN_OK;
}

void firn_reader_free(struct firn_reader *reader)
{
    if (reader == NULL)
        return;
    firn_decoder_free(reader->decoder);
    firn_parts_close(reader->parts);
    firn_sheets_close(reader->sheets);
    reader->memory->put(reader->memory->self, reader);
}

const struct firn_reader_layout *firn_reader_layout_of(const struct firn_reader *reader)
{
    return &reader->layout;
}

void firn_reader_damage_so_far(const struct firn_reader *reader, struct firn_reader_damage *damage)
{
    firn_sheets_damage(reader->sheets, damage);
}

enum firn_status firn_reader_title_page(struct firn_reader *reader, uint8_t page[4096])
{
    struct firn_store *store = reader->options.store;
    uint8_t header[FIRN_RECORD_HEADER_BYTES];
    struct firn_record record;
    struct firn_sheets_gap gap;
    size_t got = 0;
    int os_error = 0;

    if (firn_sheets_read(reader->sheets, 0, header, sizeof header, &gap) == FIRN_OK &&
        firn_record_get(header, 0, &record) && record.type == FIRN_RECORD_TITLE &&
        record.body_bytes == FIRN_TITLE_PAGE_BYTES &&
        firn_sheets_read(reader->sheets, sizeof header, page, FIRN_TITLE_PAGE_BYTES, &gap) == FIRN_OK)
        return FIRN_OK;
    if (store->read_at(store->self, 0, page, FIRN_TITLE_PAGE_BYTES, &got, &os_error) != FIRN_OK)
        got = 0;
    memset(page + got, ' ', FIRN_TITLE_PAGE_BYTES - got);
    return FIRN_LOST;
}

void firn_reader_layout_words(const struct firn_reader_layout *layout, char *words, size_t room)
{
    struct firn_text text;

    firn_text_start(&text, words, room);
    firn_title_layout(&layout->geometry, &text);
}

/* The record of a text stands before the first BATCH. */
static enum firn_status find_text(struct firn_reader *reader, enum firn_record_type type, struct firn_record *record)
{
    uint64_t at = firn_record_span(FIRN_TITLE_PAGE_BYTES), limit = firn_sheets_stream_bytes(reader->sheets);
    bool skipped = false;

    for (;;) {
        enum firn_status status = firn_parts_find_record(reader->sheets, at, limit, record, &skipped);

        if (status == FIRN_OK && record->type == type)
            return FIRN_OK;
        if (status == FIRN_OK && record->type < FIRN_RECORD_BATCH) {
            at = record->at + firn_record_span(record->body_bytes);
            continue;
        }
        return status != FIRN_OK && status != FIRN_END ? status : skipped ? FIRN_LOST : FIRN_END;
    }
}

enum firn_status firn_reader_text(struct firn_reader *reader, enum firn_reader_text which,
                                  firn_reader_text_taker *take, void *self)
{
    struct firn_record record;
    enum firn_status status = find_text(reader, which == FIRN_READER_TEXT_SOURCE ? FIRN_RECORD_READER
                                                                                : FIRN_RECORD_SPEC, &record);
    bool whole = true;

    for (uint64_t at = 0; status == FIRN_OK && at < record.body_bytes;) {
        uint8_t bytes[FIRN_BLOCK_PAYLOAD_BYTES];
        uint64_t from = record.at + FIRN_RECORD_HEADER_BYTES + at, left = record.body_bytes - at;
        size_t step = FIRN_BLOCK_PAYLOAD_BYTES - (size_t)(from % FIRN_BLOCK_PAYLOAD_BYTES);   /* one block at a time */
        struct firn_sheets_gap gap;

        step = left < step ? (size_t)left : step;
        status = firn_sheets_read(reader->sheets, from, bytes, step, &gap);
        if (status == FIRN_END || status == FIRN_LOST) {
            whole = false;
            status = take(self, NULL, step);
        } else if (status == FIRN_OK) {
            status = take(self, bytes, step);
        }
        at += step;
    }
    return status == FIRN_OK && !whole ? FIRN_LOST : status;
}

/* --- foresight: a first walk that only notes what is lost --- */

struct foreseen { uint64_t item, lost_bytes; };

struct foresight {
    const struct firn_memory *memory;
    const struct firn_reader_visitor *visitor;
    struct foreseen *list;
    size_t count, capacity, next;
};

static bool foresee_wants(void *self, const struct firn_item *item)
{
    const struct firn_reader_visitor *visitor = ((struct foresight *)self)->visitor;

    return item->has_content && (visitor->wants == NULL || visitor->wants(visitor->self, item));
}

static enum firn_status foresee_bytes(void *self, const struct firn_item *item, uint64_t at, const uint8_t *bytes,
                                      size_t count)
{
    (void)self, (void)item, (void)at, (void)bytes, (void)count;
    return FIRN_OK;
}

static enum firn_status foresee_end(void *self, const struct firn_item *item, const struct firn_reader_outcome *outcome)
{
    struct foresight *foresight = self;
    void *list = foresight->list;
    enum firn_status status;

    if (outcome->lost_bytes == 0 && (!outcome->sum_known || outcome->sum_right))
        return FIRN_OK;
    status = firn_memory_grow(foresight->memory, &list, &foresight->capacity, foresight->count + 1,
                              sizeof *foresight->list);
    foresight->list = list;
    if (status == FIRN_OK)
        foresight->list[foresight->count++] = (struct foreseen){
            item->number, outcome->lost_bytes > 0 ? outcome->lost_bytes : item->stored_bytes
        };
    return status;
}

/* Items come in the same order in both walks, so the list is read through alongside. */
static enum firn_status begin_foreseen(void *self, const struct firn_item *item, uint64_t unknown)
{
    struct foresight *foresight = self;
    const struct firn_reader_visitor *visitor = foresight->visitor;
    uint64_t lost = unknown;

    while (foresight->next < foresight->count && foresight->list[foresight->next].item < item->number)
        foresight->next++;
    if (foresight->next < foresight->count && foresight->list[foresight->next].item == item->number)
        lost = foresight->list[foresight->next].lost_bytes;
    return visitor->begin(visitor->self, item, lost);
}

static bool pass_wants(void *self, const struct firn_item *item)
{
    const struct firn_reader_visitor *visitor = ((struct foresight *)self)->visitor;

    return visitor->wants == NULL || visitor->wants(visitor->self, item);
}

static enum firn_status pass_bytes(void *self, const struct firn_item *item, uint64_t at, const uint8_t *bytes,
                                   size_t count)
{
    const struct firn_reader_visitor *visitor = ((struct foresight *)self)->visitor;

    return visitor->bytes(visitor->self, item, at, bytes, count);
}

static enum firn_status pass_gap(void *self, const struct firn_item *item, uint64_t at, uint64_t count,
                                 enum firn_reader_loss why, uint64_t container_at)
{
    const struct firn_reader_visitor *visitor = ((struct foresight *)self)->visitor;

    return visitor->gap == NULL ? FIRN_OK : visitor->gap(visitor->self, item, at, count, why, container_at);
}

static enum firn_status pass_end(void *self, const struct firn_item *item, const struct firn_reader_outcome *outcome)
{
    const struct firn_reader_visitor *visitor = ((struct foresight *)self)->visitor;

    return visitor->end == NULL ? FIRN_OK : visitor->end(visitor->self, item, outcome);
}

static void pass_lost_blocks(void *self, uint64_t first, uint64_t last, uint64_t count)
{
    const struct firn_reader_visitor *visitor = ((struct foresight *)self)->visitor;

    if (visitor->lost_blocks != NULL)
        visitor->lost_blocks(visitor->self, first, last, count);
}

static enum firn_status walk_foreseeing(struct firn_reader *reader, const struct firn_reader_visitor *visitor,
                                        struct firn_reader_walk_report *report)
{
    struct foresight foresight = { .memory = reader->memory, .visitor = visitor };
    struct firn_reader_visitor first = {
        .self = &foresight, .wants = foresee_wants, .bytes = foresee_bytes, .end = foresee_end
    };
    struct firn_reader_visitor second = {
        .self = &foresight, .wants = pass_wants, .begin = begin_foreseen, .bytes = pass_bytes, .gap = pass_gap,
        .end = pass_end, .lost_blocks = pass_lost_blocks
    };
    enum firn_status status = firn_walk(reader->parts, reader->decoder, reader->memory, &first, report);

    if (status == FIRN_OK)
        status = firn_walk(reader->parts, reader->decoder, reader->memory, &second, report);
    reader->memory->put(reader->memory->self, foresight.list);
    return status;
}

enum firn_status firn_reader_walk(struct firn_reader *reader, const struct firn_reader_visitor *visitor,
                                  struct firn_fault *fault, struct firn_reader_walk_report *report)
{
    const struct firn_reader_layout *layout = &reader->layout;
    enum firn_status status;

    if (fault != NULL)
        *fault = (struct firn_fault){ 0 };
    status = visitor->foresight && visitor->begin != NULL && visitor->bytes != NULL
                                  ? walk_foreseeing(reader, visitor, report)
                                  : firn_walk(reader->parts, reader->decoder, reader->memory, visitor, report);

    if (layout->colophon_found && layout->items > report->items)
        report->items_unknown = layout->items - report->items;
    report->cut_short = !layout->colophon_found;
    if (status != FIRN_OK && fault != NULL && fault->os_error == 0 && fault->what[0] == '\0')
        firn_fault_tell(fault, status, 0, 0, "");
    return status;
}

static enum firn_status tell_segments(struct firn_reader *reader, const struct firn_parts_part *part,
                                      firn_reader_segment_teller *tell, void *self)
{
    enum firn_status status = FIRN_OK;

    firn_decoder_forget(reader->decoder);
    for (size_t i = 0; i < part->place_count && status == FIRN_OK; i++) {
        const struct firn_catalogue_place *place = &part->places[i];
        struct firn_decoder_segment found;
        struct firn_reader_segment segment = {
            .content_at = place->content_at, .stream_at = place->at, .raw_bytes = place->raw_bytes,
            .coded_bytes = place->body_bytes - FIRN_CATALOGUE_SEGMENT_HEAD_BYTES
        };

        status = firn_decoder_get(reader->decoder, part->places, part->place_count, i, &found);
        if (status == FIRN_OK) {
            segment.raw = found.raw;
            segment.coded = found.coded;
        } else if (status == FIRN_NO_MEMORY || status == FIRN_STOPPED) {
            return status;
        }
        status = tell(self, &segment);
    }
    return status;
}

enum firn_status firn_reader_segments(struct firn_reader *reader, firn_reader_segment_teller *tell, void *self,
                                      struct firn_fault *fault)
{
    struct firn_parts_part part;
    enum firn_status status;

    firn_parts_rewind(reader->parts);
    while ((status = firn_parts_next(reader->parts, &part)) == FIRN_OK) {
        status = tell_segments(reader, &part, tell, self);
        if (status != FIRN_OK)
            break;
    }
    return status == FIRN_END ? FIRN_OK : firn_fault_tell(fault, status, 0, 0, "");
}
