/* tests/fuzz/fuzz_segment.c - any bytes as a coded segment, and any bytes coded and decoded again */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "firn/segment.h"

#include <stdlib.h>
#include <string.h>

int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size);

enum { RAW_MAX = 1 << 16 };

static void count_stretch(void *self, const struct firn_segment_stretch *stretch)
{
    *(size_t *)self += stretch->raw_bytes;
}

int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size)
{
    static uint8_t raw[RAW_MAX], coded[RAW_MAX + 4096];
    static void *work;
    size_t coded_bytes, told = 0, room = size > 1 ? 1 + (data[0] | (size_t)data[1] << 8) : 1;

    if (work == NULL) {
        size_t most = firn_segment_encode_work_bytes() > firn_segment_decode_work_bytes()
                          ? firn_segment_encode_work_bytes()
                          : firn_segment_decode_work_bytes();

        if (posix_memalign(&work, 64, most) != 0)
            abort();
    }
    if (size < 4)
        return 0;
    if (firn_segment_decode(data + 2, size - 2, raw, room, work) == FIRN_OK &&
        (firn_segment_examine(data + 2, size - 2, raw, room, work, count_stretch, &told) != FIRN_OK || told != room))
        abort();
    if (size > RAW_MAX || firn_segment_bound(size) > sizeof coded)
        return 0;
    if (firn_segment_encode(data, size, (enum firn_segment_effort)(data[2] % 4), coded, &coded_bytes, work) !=
            FIRN_OK ||
        coded_bytes > firn_segment_bound(size) || firn_segment_decode(coded, coded_bytes, raw, size, work) != FIRN_OK ||
        memcmp(raw, data, size) != 0)
        abort();
    return 0;
}
