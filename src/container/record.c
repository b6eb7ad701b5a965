/* container/record.c - record headers: format-spec/stream.md, table 1 */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "container/record.h"

#include "base/bytes.h"
#include "guard/hash.h"

enum { MAGIC_AT = 0, TYPE_AT = 4, ZERO_AT = 6, BODY_AT = 8, PLACE_AT = 16, SUM_AT = 24 };

static const uint8_t magic[4] = { 'F', 'R', 'E', 'C' };

void firn_record_put(const struct firn_record *record, uint8_t header[FIRN_RECORD_HEADER_BYTES])
{
    memcpy(header + MAGIC_AT, magic, sizeof magic);
    firn_bytes_put16(header + TYPE_AT, (uint16_t)record->type);
    firn_bytes_put16(header + ZERO_AT, 0);
    firn_bytes_put64(header + BODY_AT, record->body_bytes);
    firn_bytes_put64(header + PLACE_AT, record->at);
    firn_bytes_put64(header + SUM_AT, firn_hash_low(header, SUM_AT));
}

bool firn_record_get(const uint8_t header[FIRN_RECORD_HEADER_BYTES], uint64_t at, struct firn_record *record)
{
    if (memcmp(header + MAGIC_AT, magic, sizeof magic) != 0 || firn_bytes_get64(header + PLACE_AT) != at ||
        firn_bytes_get64(header + SUM_AT) != firn_hash_low(header, SUM_AT))
        return false;
    record->type = firn_bytes_get16(header + TYPE_AT);
    record->at = at;
    record->body_bytes = firn_bytes_get64(header + BODY_AT);
    return record->body_bytes <= UINT64_MAX / 4;
}

uint64_t firn_record_span(uint64_t body_bytes)
{
    return (FIRN_RECORD_HEADER_BYTES + body_bytes + FIRN_RECORD_ALIGNMENT - 1) / FIRN_RECORD_ALIGNMENT
           * FIRN_RECORD_ALIGNMENT;
}
