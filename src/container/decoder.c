/* container/decoder.c - raw bytes of segments, several decoded at a time */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "container/decoder.h"

#include "base/memory.h"
#include "container/record.h"
#include "firn/segment.h"
#include "guard/hash.h"

enum { SLOTS = 8 };      /* 8 MiB raw and as much coded: the window of the writer */

struct slot {
    uint8_t *body, *raw;
    struct firn_catalogue_place place;
    enum firn_status status;
    uint64_t container_at, first_lost, last_lost, lost_blocks;
};

struct firn_decoder {
    struct firn_sheets *sheets;
    const struct firn_memory *memory;
    struct firn_threads *threads;
    uint8_t *work;                     /* decoder work, one for each worker */
    struct slot slots[SLOTS];
    size_t first, count;               /* slots hold places[first .. first + count) */
    size_t ahead;                      /* how many to read next time */
};

static size_t body_room(void)
{
    return FIRN_CATALOGUE_SEGMENT_HEAD_BYTES + firn_segment_bound(FIRN_SEGMENT_RAW_MAX);
}

enum firn_status firn_decoder_make(struct firn_sheets *sheets, const struct firn_memory *memory, unsigned threads,
                                   struct firn_decoder **out)
{
    struct firn_decoder *decoder = firn_memory_get_zeroed(memory, 1, sizeof *decoder);
    enum firn_status status;
    bool whole;

    *out = NULL;
    if (decoder == NULL)
        return FIRN_NO_MEMORY;
    decoder->sheets = sheets;
    decoder->memory = memory;
    decoder->ahead = 1;
    status = firn_threads_make(memory, threads, &decoder->threads);
    decoder->work = memory->get(memory->self, threads * firn_segment_decode_work_bytes());
    whole = decoder->work != NULL;
    for (size_t i = 0; i < SLOTS; i++) {
        decoder->slots[i].body = memory->get(memory->self, body_room());
        decoder->slots[i].raw = memory->get(memory->self, FIRN_SEGMENT_RAW_MAX);
        whole = whole && decoder->slots[i].body != NULL && decoder->slots[i].raw != NULL;
    }
    if (status != FIRN_OK || !whole) {
        firn_decoder_free(decoder);
        return status != FIRN_OK ? status : FIRN_NO_MEMORY;
    }
    *out = decoder;
    return FIRN_OK;
}

void firn_decoder_free(struct firn_decoder *decoder)
{
    const struct firn_memory *memory;

    if (decoder == NULL)
        return;
    memory = decoder->memory;
    firn_threads_free(decoder->threads);
    for (size_t i = 0; i < SLOTS; i++) {
        memory->put(memory->self, decoder->slots[i].body);
        memory->put(memory->self, decoder->slots[i].raw);
    }
    memory->put(memory->self, decoder->work);
    memory->put(memory->self, decoder);
}

void firn_decoder_forget(struct firn_decoder *decoder)
{
    decoder->first = decoder->count = 0;
}

/* Goes on reading behind a gap, to find out which blocks of the place are lost. Returns only reasons to give up. */
static enum firn_status count_lost(struct firn_decoder *decoder, const struct firn_catalogue_place *place,
                                   struct firn_sheets_gap gap, struct slot *slot)
{
    uint64_t at, end = place->at + FIRN_RECORD_HEADER_BYTES + place->body_bytes;
    enum firn_status status = FIRN_LOST;

    slot->first_lost = gap.container_at / FIRN_BLOCK_BYTES - 1;
    slot->lost_blocks = 0;
    while (status == FIRN_LOST) {
        slot->last_lost = gap.container_at / FIRN_BLOCK_BYTES - 1;
        slot->lost_blocks++;
        at = gap.resume;
        if (at >= end)
            return FIRN_OK;
        status = firn_sheets_read(decoder->sheets, at, slot->body, (size_t)(end - at), &gap);
    }
    return status == FIRN_NO_MEMORY || status == FIRN_STOPPED ? status : FIRN_OK;
}

/* Reads the body of a place. What is wrong with it stands in the slot; returned are only reasons to give up. */
static enum firn_status read_slot(struct firn_decoder *decoder, const struct firn_catalogue_place *place,
                                  struct slot *slot)
{
    struct firn_sheets_gap gap;
    struct firn_catalogue_place told;

    slot->place = *place;
    slot->container_at = slot->first_lost = slot->last_lost = slot->lost_blocks = 0;
    slot->status = firn_sheets_read(decoder->sheets, place->at + FIRN_RECORD_HEADER_BYTES, slot->body,
                                    place->body_bytes, &gap);
    if (slot->status == FIRN_NO_MEMORY || slot->status == FIRN_STOPPED)
        return slot->status;
    if (slot->status != FIRN_OK) {
        enum firn_status why = slot->status;

        slot->container_at = gap.container_at;
        slot->status = FIRN_LOST;
        return why == FIRN_LOST ? count_lost(decoder, place, gap, slot) : FIRN_OK;
    }
    told = *place;
    if (firn_catalogue_get_segment(slot->body, &told) != FIRN_OK || told.raw_bytes != place->raw_bytes ||
        told.content_at != place->content_at)
        slot->status = FIRN_MISMATCH;
    return FIRN_OK;
}

static void decode_slot(void *self, size_t index, unsigned worker)
{
    struct firn_decoder *decoder = self;
    struct slot *slot = &decoder->slots[index];
    uint8_t *work = decoder->work + worker * firn_segment_decode_work_bytes();

    if (slot->status != FIRN_OK)
        return;
    if (firn_segment_decode(slot->body + FIRN_CATALOGUE_SEGMENT_HEAD_BYTES,
                            slot->place.body_bytes - FIRN_CATALOGUE_SEGMENT_HEAD_BYTES, slot->raw,
                            slot->place.raw_bytes, work) != FIRN_OK ||
        !firn_hash_matches(slot->raw, slot->place.raw_bytes, slot->body + FIRN_CATALOGUE_SEGMENT_HASH_AT))
        slot->status = FIRN_MISMATCH;
}

/* Reads on doubles while places are asked for in order, so that a single wanted item does not cost its neighbours. */
static enum firn_status load(struct firn_decoder *decoder, const struct firn_catalogue_place *places, size_t count,
                             size_t index)
{
    bool in_order = index == decoder->first + decoder->count;
    size_t left = count - index;

    decoder->ahead = in_order ? 2 * decoder->ahead : 1;
    decoder->ahead = decoder->ahead < SLOTS ? decoder->ahead : SLOTS;
    decoder->first = index;
    decoder->count = 0;
    while (decoder->count < decoder->ahead && decoder->count < left) {
        enum firn_status status = read_slot(decoder, &places[index + decoder->count], &decoder->slots[decoder->count]);

        if (status != FIRN_OK) {
            decoder->count = 0;
            return status;
        }
        decoder->count++;
    }
    firn_threads_run(decoder->threads, decode_slot, decoder, decoder->count);
    return FIRN_OK;
}

enum firn_status firn_decoder_get(struct firn_decoder *decoder, const struct firn_catalogue_place *places, size_t count,
                                  size_t index, struct firn_decoder_segment *segment)
{
    const struct slot *slot;

    if (index - decoder->first >= decoder->count) {
        enum firn_status status = load(decoder, places, count, index);

        if (status != FIRN_OK)
            return status;
    }
    slot = &decoder->slots[index - decoder->first];
    *segment = (struct firn_decoder_segment){
        .raw = slot->raw, .coded = slot->body + FIRN_CATALOGUE_SEGMENT_HEAD_BYTES,
        .coded_bytes = slot->place.body_bytes - FIRN_CATALOGUE_SEGMENT_HEAD_BYTES, .container_at = slot->container_at,
        .first_lost = slot->first_lost, .last_lost = slot->last_lost, .lost_blocks = slot->lost_blocks
    };
    return slot->status;
}
