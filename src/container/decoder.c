/* container/decoder.c - raw bytes of segments, several decoded at a time */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "container/decoder.h"

#include "base/memory.h"
#include "container/record.h"
#include "firn/segment.h"
#include "guard/hash.h"

enum { AHEAD_MAX = 8, SLOTS = AHEAD_MAX + 4 };     /* MiB raw, and as much coded */

struct slot {
    uint8_t *body, *raw;
    struct firn_catalogue_place place;
    enum firn_status status;
    uint64_t container_at, first_lost, last_lost, lost_blocks;
    bool held;                         /* it has place number `index` of the part */
    size_t index;
    uint64_t used;                     /* when it was asked for last */
};

struct firn_decoder {
    struct firn_sheets *sheets;
    const struct firn_memory *memory;
    struct firn_threads *threads;
    uint8_t *work;                     /* decoder work, one for each worker */
    struct slot slots[SLOTS];
    uint64_t clock;
    struct slot *job[AHEAD_MAX];       /* slots to be decoded by the threads */
    size_t jobs;
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
    for (size_t i = 0; i < SLOTS; i++)
        decoder->slots[i].held = false;
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
    struct slot *slot = decoder->job[index];
    uint8_t *work = decoder->work + worker * firn_segment_decode_work_bytes();

    if (slot->status != FIRN_OK)
        return;
    if (firn_segment_decode(slot->body + FIRN_CATALOGUE_SEGMENT_HEAD_BYTES,
                            slot->place.body_bytes - FIRN_CATALOGUE_SEGMENT_HEAD_BYTES, slot->raw,
                            slot->place.raw_bytes, work) != FIRN_OK ||
        !firn_hash_matches(slot->raw, slot->place.raw_bytes, slot->body + FIRN_CATALOGUE_SEGMENT_HASH_AT))
        slot->status = FIRN_MISMATCH;
}

static struct slot *find(struct firn_decoder *decoder, size_t index)
{
    for (size_t i = 0; i < SLOTS; i++)
        if (decoder->slots[i].held && decoder->slots[i].index == index)
            return &decoder->slots[i];
    return NULL;
}

/* The slot that was not used for longest. */
static struct slot *oldest(struct firn_decoder *decoder)
{
    struct slot *found = &decoder->slots[0];

    for (size_t i = 1; i < SLOTS; i++)
        if (decoder->slots[i].used < found->used)
            found = &decoder->slots[i];
    return found;
}

/*
 * Reads on doubles while places are asked for in order, so that a single wanted item does not cost its neighbours.
 * Items take turns between two stretches of a part; there are slots enough to keep where the other one stands.
 */
static enum firn_status load(struct firn_decoder *decoder, const struct firn_catalogue_place *places, size_t count,
                             size_t index)
{
    bool in_order = index > 0 && find(decoder, index - 1) != NULL;

    decoder->ahead = in_order ? 2 * decoder->ahead : 1;
    decoder->ahead = decoder->ahead < AHEAD_MAX ? decoder->ahead : AHEAD_MAX;
    decoder->jobs = 0;
    for (size_t k = index; k < count && k - index < decoder->ahead && find(decoder, k) == NULL; k++) {
        struct slot *slot = oldest(decoder);
        enum firn_status status;

        slot->held = false;
        status = read_slot(decoder, &places[k], slot);
        if (status != FIRN_OK) {
            firn_decoder_forget(decoder);
            return status;
        }
        slot->held = true;
        slot->index = k;
        slot->used = ++decoder->clock;
        decoder->job[decoder->jobs++] = slot;
    }
    firn_threads_run(decoder->threads, decode_slot, decoder, decoder->jobs);
    return FIRN_OK;
}

enum firn_status firn_decoder_get(struct firn_decoder *decoder, const struct firn_catalogue_place *places, size_t count,
                                  size_t index, struct firn_decoder_segment *segment)
{
    struct slot *slot = find(decoder, index);

    if (slot == NULL) {
        enum firn_status status = load(decoder, places, count, index);

        if (status != FIRN_OK)
            return status;
        slot = find(decoder, index);
    }
    slot->used = ++decoder->clock;
    *segment = (struct firn_decoder_segment){
        .raw = slot->raw, .coded = slot->body + FIRN_CATALOGUE_SEGMENT_HEAD_BYTES,
        .coded_bytes = slot->place.body_bytes - FIRN_CATALOGUE_SEGMENT_HEAD_BYTES, .container_at = slot->container_at,
        .first_lost = slot->first_lost, .last_lost = slot->last_lost, .lost_blocks = slot->lost_blocks
    };
    return slot->status;
}
