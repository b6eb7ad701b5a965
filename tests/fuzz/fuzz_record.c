/* tests/fuzz/fuzz_record.c - any bytes as a record header */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "container/record.h"

#include <stdlib.h>
#include <string.h>

int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size);

int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size)
{
    uint8_t header[FIRN_RECORD_HEADER_BYTES] = { 0 };
    struct firn_record record, made;
    uint64_t at;

    memcpy(header, data, size < sizeof header ? size : sizeof header);
    memcpy(&at, header + 16, sizeof at);
    if (firn_record_get(header, at, &record)) {
        if (firn_record_span(record.body_bytes) < record.body_bytes)
            abort();
        if (firn_record_get(header, at + 32, &made))
            abort();      /* a header is good in one place only */
    }
    made = (struct firn_record){ .type = header[4], .at = at, .body_bytes = at >> 2 };
    firn_record_put(&made, header);
    if (!firn_record_get(header, at, &record) || record.type != made.type || record.body_bytes != made.body_bytes)
        abort();
    return 0;
}
