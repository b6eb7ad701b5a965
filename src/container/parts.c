/* container/parts.c - the catalogue of a container, part by part */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "container/parts.h"

#include "base/limits.h"
#include "base/memory.h"
#include "base/text.h"
#include "firn/segment.h"
#include "guard/hash.h"

enum {
    COLOPHON_PAYLOADS = 4,               /* it is the last record and smaller than this */
    BODY_BYTES_MAX = FIRN_LIMIT_BATCH_RAW_BYTES * 2
};

struct firn_parts {
    struct firn_sheets *sheets;
    const struct firn_memory *memory;
    struct firn_parts_colophon colophon;
    bool index_known;
    uint64_t index_from, index_end;      /* the stretch of the stream that holds INDEX records */
    uint64_t index_at;                   /* next INDEX record */
    uint64_t next_part;                  /* the number it should have */
    uint64_t at;                         /* where the next part begins, as far as the parts so far tell */
    uint64_t walk_until;                 /* parts are walked from the stream below this place */
    bool walk_skipped;
    uint64_t index_lost;
    uint8_t *body;                       /* of the INDEX or BATCH record at hand */
    size_t body_capacity;
    uint8_t *entries;
    size_t entries_capacity;
    struct firn_catalogue_place *places;
    size_t places_capacity;
    struct firn_catalogue_sum *sums;
    size_t sums_capacity;
    struct firn_catalogue_index sums_of;      /* the index part whose sums were not fetched yet; sums_at 0: none */
    void *work;
};

/* --- records --- */

enum firn_status firn_parts_find_record(struct firn_sheets *sheets, uint64_t at, uint64_t limit,
                                        struct firn_record *record, bool *skipped)
{
    uint8_t header[FIRN_RECORD_HEADER_BYTES];
    struct firn_sheets_gap gap;

    while (at < limit) {
        enum firn_status status = firn_sheets_read(sheets, at, header, sizeof header, &gap);

        if (status == FIRN_OK && firn_record_get(header, at, record))
            return FIRN_OK;
        if (status != FIRN_OK && status != FIRN_LOST)
            return status;
        *skipped = true;
        /* payloads are a multiple of the alignment, so the place after a lost block is one where a record may begin */
        at = status == FIRN_LOST ? gap.resume : at + FIRN_RECORD_ALIGNMENT;
    }
    return FIRN_END;
}

/* Reads a whole body into *buffer. FIRN_LOST when some of it is gone, FIRN_OVER_LIMIT when it cannot be right. */
static enum firn_status read_body(struct firn_parts *parts, const struct firn_record *record, size_t limit)
{
    void *body = parts->body;
    struct firn_sheets_gap gap;
    enum firn_status status;

    if (record->body_bytes == 0 || record->body_bytes > limit)
        return FIRN_OVER_LIMIT;
    status = firn_memory_grow(parts->memory, &body, &parts->body_capacity, (size_t)record->body_bytes, 1);
    parts->body = body;
    if (status != FIRN_OK)
        return status;
    status = firn_sheets_read(parts->sheets, record->at + FIRN_RECORD_HEADER_BYTES, parts->body,
                              (size_t)record->body_bytes, &gap);
    return status == FIRN_END ? FIRN_LOST : status;
}

/* True for what means "this call cannot go on", as opposed to "this record is damaged". */
static bool fatal(enum firn_status status)
{
    return status == FIRN_NO_MEMORY || status == FIRN_STOPPED;
}

/* --- colophon --- */

/* The value behind `key: ` in the text, or NULL. */
static const char *value_of(const char *words, const char *key)
{
    size_t length = strlen(key);

    for (const char *line = words; line != NULL; line = strchr(line, '\n')) {
        line += *line == '\n';
        if (strncmp(line, key, length) == 0 && line[length] == ':' && line[length + 1] == ' ')
            return line + length + 2;
    }
    return NULL;
}

static bool number_of(const char *words, const char *key, uint64_t *number)
{
    const char *value = value_of(words, key), *end;
    char digits[24];
    size_t length;

    if (value == NULL || (end = strchr(value, '\n')) == NULL)
        return false;
    length = (size_t)(end - value);
    if (length == 0 || length >= sizeof digits)
        return false;
    memcpy(digits, value, length);
    digits[length] = '\0';
    return firn_text_parse_count(digits, number) == FIRN_OK;
}

static bool parse_colophon(const char *words, struct firn_parts_colophon *colophon)
{
    static const char seal[] = "\nxxh3-128-of-the-above: ";
    const char *sealed = strstr(words, seal), *digest = value_of(words, "catalogue-sha256");
    uint8_t hash[FIRN_HASH_BYTES];
    size_t covered;

    if (sealed == NULL || digest == NULL)
        return false;
    covered = (size_t)(sealed - words) + sizeof seal - 1;
    if (strlen(words + covered) < 2 * sizeof hash ||
        firn_text_parse_hex(words + covered, sizeof hash, hash) != FIRN_OK ||
        !firn_hash_matches((const uint8_t *)words, covered, hash))
        return false;
    return number_of(words, "items", &colophon->items) && number_of(words, "withdrawn", &colophon->withdrawn) &&
           number_of(words, "content-bytes", &colophon->content_bytes) &&
           number_of(words, "stored-bytes", &colophon->stored_bytes) &&
           number_of(words, "segments", &colophon->segments) &&
           number_of(words, "segment-bytes", &colophon->coded_bytes) && number_of(words, "parts", &colophon->parts) &&
           number_of(words, "index-at", &colophon->index_at) && colophon->index_at % FIRN_RECORD_ALIGNMENT == 0 &&
           firn_text_parse_hex(digest, sizeof colophon->catalogue_sha256, colophon->catalogue_sha256) == FIRN_OK;
}

static enum firn_status find_colophon(struct firn_parts *parts)
{
    uint64_t end = firn_sheets_stream_bytes(parts->sheets), from, room = COLOPHON_PAYLOADS * FIRN_BLOCK_PAYLOAD_BYTES;
    char words[COLOPHON_PAYLOADS * FIRN_BLOCK_PAYLOAD_BYTES + 1];
    struct firn_record record;
    bool skipped = false;
    enum firn_status status;

    from = end > room ? end - room : 0;
    for (;;) {
        status = firn_parts_find_record(parts->sheets, from, end, &record, &skipped);
        if (status != FIRN_OK)
            return fatal(status) ? status : FIRN_OK;
        from = record.at + FIRN_RECORD_ALIGNMENT;
        if (record.type != FIRN_RECORD_COLOPHON || record.body_bytes == 0 || record.body_bytes >= sizeof words)
            continue;
        status = read_body(parts, &record, sizeof words - 1);
        if (fatal(status))
            return status;
        if (status != FIRN_OK)
            continue;
        memcpy(words, parts->body, (size_t)record.body_bytes);
        words[record.body_bytes] = '\0';
        if (parse_colophon(words, &parts->colophon) && parts->colophon.index_at <= record.at) {
            parts->colophon.found = true;
            parts->colophon.at = record.at;
            return FIRN_OK;
        }
    }
}

/*
 * Without a colophon: goes back from the end, payload by payload, while the records found there are INDEX records. A
 * record of another kind ends the search; between two headers of one INDEX record there may be many payloads.
 */
static enum firn_status find_index_from_behind(struct firn_parts *parts)
{
    uint64_t end = firn_sheets_stream_bytes(parts->sheets), payload = end / FIRN_BLOCK_PAYLOAD_BYTES;

    parts->index_end = end;
    while (payload-- > 0) {
        uint64_t from = payload * FIRN_BLOCK_PAYLOAD_BYTES, limit = from + FIRN_BLOCK_PAYLOAD_BYTES;
        struct firn_record record;
        bool skipped = false, other = false;
        enum firn_status status;

        while ((status = firn_parts_find_record(parts->sheets, from, limit, &record, &skipped)) == FIRN_OK) {
            from = record.at + FIRN_RECORD_ALIGNMENT;
            if (record.type == FIRN_RECORD_INDEX && (!parts->index_known || record.at < parts->index_from)) {
                parts->index_known = true;
                parts->index_from = record.at;
            }
            other = other || (record.type != FIRN_RECORD_INDEX && record.type != FIRN_RECORD_COLOPHON);
        }
        if (fatal(status))
            return status;
        if (other)
            break;
    }
    return FIRN_OK;
}

enum firn_status firn_parts_open(struct firn_sheets *sheets, const struct firn_memory *memory, struct firn_parts **out)
{
    struct firn_parts *parts = firn_memory_get_zeroed(memory, 1, sizeof *parts);
    enum firn_status status;

    *out = NULL;
    if (parts == NULL)
        return FIRN_NO_MEMORY;
    parts->sheets = sheets;
    parts->memory = memory;
    parts->work = memory->get(memory->self, firn_segment_decode_work_bytes());
    status = parts->work == NULL ? FIRN_NO_MEMORY : find_colophon(parts);
    if (status == FIRN_OK && parts->colophon.found) {
        parts->index_known = true;
        parts->index_from = parts->colophon.index_at;
        parts->index_end = parts->colophon.at;
    } else if (status == FIRN_OK) {
        status = find_index_from_behind(parts);
    }
    if (status != FIRN_OK) {
        firn_parts_close(parts);
        return status;
    }
    firn_parts_rewind(parts);
    *out = parts;
    return FIRN_OK;
}

void firn_parts_close(struct firn_parts *parts)
{
    const struct firn_memory *memory;

    if (parts == NULL)
        return;
    memory = parts->memory;
    memory->put(memory->self, parts->body);
    memory->put(memory->self, parts->entries);
    memory->put(memory->self, parts->places);
    memory->put(memory->self, parts->sums);
    memory->put(memory->self, parts->work);
    memory->put(memory->self, parts);
}

const struct firn_parts_colophon *firn_parts_colophon_of(const struct firn_parts *parts)
{
    return &parts->colophon;
}

void firn_parts_rewind(struct firn_parts *parts)
{
    parts->index_at = parts->index_from;
    parts->next_part = 0;
    parts->at = 0;
    parts->walk_until = parts->index_known ? 0 : firn_sheets_stream_bytes(parts->sheets);
    parts->walk_skipped = false;
    parts->index_lost = 0;
}

uint64_t firn_parts_index_lost(const struct firn_parts *parts)
{
    return parts->index_lost;
}

/* --- a part --- */

static enum firn_status decode_entries(struct firn_parts *parts, struct firn_parts_part *part)
{
    void *entries = parts->entries;
    enum firn_status status = firn_memory_grow(parts->memory, &entries, &parts->entries_capacity, part->batch.raw_bytes,
                                               1);

    parts->entries = entries;
    if (status == FIRN_OK)
        status = firn_catalogue_decode_batch(&part->batch, parts->entries, parts->work);
    part->has_batch = status == FIRN_OK;
    part->entries = parts->entries;
    return status;
}

static enum firn_status add_place(struct firn_parts *parts, const struct firn_catalogue_place *place, size_t *count)
{
    void *places = parts->places;
    enum firn_status status = firn_memory_grow(parts->memory, &places, &parts->places_capacity, *count + 1,
                                               sizeof *place);

    parts->places = places;
    if (status == FIRN_OK)
        parts->places[(*count)++] = *place;
    return status;
}

/* An INDEX body becomes a part. Any status but FIRN_OK and the fatal ones: it is not to be trusted. */
static enum firn_status part_from_index(struct firn_parts *parts, size_t body_bytes, struct firn_parts_part *part,
                                        struct firn_catalogue_index *index)
{
    enum firn_status status = firn_catalogue_open_index(parts->body, body_bytes, index);

    *part = (struct firn_parts_part){ .complete = true };
    if (status == FIRN_OK && index->batch_bytes > 0) {
        status = firn_catalogue_open_batch(index->batch, index->batch_bytes, &part->batch);
        if (status == FIRN_OK)
            status = decode_entries(parts, part);
    }
    for (uint32_t i = 0; i < index->segments && status == FIRN_OK; i++) {
        struct firn_catalogue_place place;

        status = firn_catalogue_get_place(index->place_bytes + (size_t)i * FIRN_CATALOGUE_PLACE_BYTES, &place);
        if (status == FIRN_OK)
            status = add_place(parts, &place, &part->place_count);
    }
    part->places = parts->places;
    parts->sums_of = *index;
    return status;
}

/*
 * The next INDEX part that is whole. When one or more had to be passed over, the stream up to it must be walked
 * first: then *found is false, walk_until is set, and index_at stays before that part.
 */
static enum firn_status next_from_index(struct firn_parts *parts, struct firn_parts_part *part, bool *found)
{
    *found = false;
    while (parts->index_at < parts->index_end) {
        struct firn_catalogue_index index;
        struct firn_record record;
        bool skipped = false;
        enum firn_status status = firn_parts_find_record(parts->sheets, parts->index_at, parts->index_end, &record,
                                                         &skipped);

        if (fatal(status))
            return status;
        if (status != FIRN_OK)
            break;
        if (record.type == FIRN_RECORD_INDEX) {
            status = read_body(parts, &record, BODY_BYTES_MAX);
            if (status == FIRN_OK)
                status = part_from_index(parts, (size_t)record.body_bytes, part, &index);
            if (fatal(status))
                return status;
            if (status == FIRN_OK && index.part > parts->next_part) {
                parts->next_part = index.part;
                parts->walk_until = index.at;
                parts->walk_skipped = true;
                return FIRN_OK;
            }
            if (status == FIRN_OK && index.part == parts->next_part) {
                parts->index_at = record.at + firn_record_span(record.body_bytes);
                parts->at = index.end;
                parts->next_part++;
                *found = true;
                return FIRN_OK;
            }
        }
        /* a damaged body does not tell where the next record is more surely than its header does */
        parts->index_at = record.at + firn_record_span(record.body_bytes);
    }
    parts->index_at = parts->index_end;
    if (parts->at < parts->index_from) {
        parts->walk_until = parts->index_from;
        parts->walk_skipped = true;
    }
    return FIRN_OK;
}

/* Adds the sums of the SUMS body at hand. */
static enum firn_status add_sums(struct firn_parts *parts, size_t body_bytes, struct firn_parts_part *part)
{
    void *sums = parts->sums;
    uint32_t count;
    enum firn_status status = firn_catalogue_count_sums(parts->body, body_bytes, &count);

    if (status != FIRN_OK || count > FIRN_LIMIT_PART_SUMS - part->sum_count)
        return status != FIRN_OK ? status : FIRN_OVER_LIMIT;
    status = firn_memory_grow(parts->memory, &sums, &parts->sums_capacity, part->sum_count + count,
                              sizeof *parts->sums);
    parts->sums = sums;
    if (status == FIRN_OK)
        status = firn_catalogue_get_sums(parts->body, parts->sums + part->sum_count);
    if (status == FIRN_OK)
        part->sum_count += count;
    part->sums = parts->sums;
    return status;
}

enum firn_status firn_parts_sums(struct firn_parts *parts, struct firn_parts_part *part)
{
    const struct firn_catalogue_index *index = &parts->sums_of;
    uint64_t at = index->sums_at;
    struct firn_record record;
    bool skipped = false;
    enum firn_status status;

    if (at == 0)
        return FIRN_OK;
    parts->sums_of.sums_at = 0;
    status = firn_parts_find_record(parts->sheets, at, at + 1, &record, &skipped);
    if (status == FIRN_OK && (record.type != FIRN_RECORD_SUMS || record.body_bytes != index->sums_bytes))
        status = FIRN_BAD_DATA;
    if (status == FIRN_OK)
        status = read_body(parts, &record, BODY_BYTES_MAX);
    if (status == FIRN_OK && memcmp(parts->body, index->sums_seal, sizeof index->sums_seal) != 0)
        status = FIRN_MISMATCH;
    if (status == FIRN_OK)
        status = add_sums(parts, (size_t)record.body_bytes, part);
    return fatal(status) ? status : FIRN_OK;
}

/* Adds what a record in the stream tells to the part being put together. */
static enum firn_status take_record(struct firn_parts *parts, const struct firn_record *record,
                                    struct firn_parts_part *part)
{
    enum firn_status status = FIRN_OK;

    if (record->type == FIRN_RECORD_SEGMENT) {
        uint8_t head[FIRN_CATALOGUE_SEGMENT_HEAD_BYTES];
        struct firn_catalogue_place place = { .at = record->at, .body_bytes = (uint32_t)record->body_bytes };
        struct firn_sheets_gap gap;

        if (record->body_bytes > UINT32_MAX)
            return FIRN_BAD_DATA;
        status = firn_sheets_read(parts->sheets, record->at + FIRN_RECORD_HEADER_BYTES, head, sizeof head, &gap);
        if (status == FIRN_OK)
            status = firn_catalogue_get_segment(head, &place);
        return status == FIRN_OK ? add_place(parts, &place, &part->place_count) : status;
    }
    status = read_body(parts, record, BODY_BYTES_MAX);
    if (status != FIRN_OK)
        return status;
    if (record->type == FIRN_RECORD_BATCH) {
        status = firn_catalogue_open_batch(parts->body, (size_t)record->body_bytes, &part->batch);
        return status == FIRN_OK ? decode_entries(parts, part) : status;
    }
    return record->type == FIRN_RECORD_SUMS ? add_sums(parts, (size_t)record->body_bytes, part) : FIRN_OK;
}

/* Walks the stream from parts->at: everything up to the next BATCH is one part. */
static enum firn_status next_from_stream(struct firn_parts *parts, struct firn_parts_part *part)
{
    struct firn_record record;
    enum firn_status status;

    *part = (struct firn_parts_part){ .complete = true };
    parts->sums_of.sums_at = 0;
    for (;;) {
        bool skipped = false;

        status = firn_parts_find_record(parts->sheets, parts->at, parts->walk_until, &record, &skipped);
        if (fatal(status))
            return status;
        if (skipped)
            part->complete = false;
        if (status != FIRN_OK || record.type == FIRN_RECORD_INDEX || record.type == FIRN_RECORD_COLOPHON) {
            parts->at = parts->walk_until;
            break;
        }
        if ((record.type == FIRN_RECORD_BATCH && (part->has_batch || part->place_count > 0 || part->sum_count > 0)) ||
            part->place_count == FIRN_LIMIT_PART_SEGMENTS)
            break;
        if (record.type == FIRN_RECORD_BATCH || record.type == FIRN_RECORD_SEGMENT || record.type == FIRN_RECORD_SUMS) {
            status = take_record(parts, &record, part);
            if (fatal(status))
                return status;
            if (status != FIRN_OK)
                part->complete = false;
        }
        parts->at = record.at + firn_record_span(record.body_bytes);
    }
    part->places = parts->places;
    part->sums = parts->sums;
    return part->has_batch || part->place_count > 0 || part->sum_count > 0 ? FIRN_OK : FIRN_END;
}

enum firn_status firn_parts_next(struct firn_parts *parts, struct firn_parts_part *part)
{
    for (;;) {
        enum firn_status status;
        bool found;

        if (parts->at < parts->walk_until) {
            status = next_from_stream(parts, part);
            if (status == FIRN_OK && parts->walk_skipped)
                parts->index_lost++;
            if (status != FIRN_END)
                return status;
            continue;
        }
        if (!parts->index_known || parts->index_at >= parts->index_end)
            return FIRN_END;
        status = next_from_index(parts, part, &found);
        if (status != FIRN_OK || found)
            return status;
    }
}
