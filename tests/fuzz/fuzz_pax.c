/* tests/fuzz/fuzz_pax.c - any bytes as the pax header of an item */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "firn/about.h"
#include "transfer/pax_time.h"

#include <stdlib.h>
#include <string.h>

int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size);

/* Puts the sum of each 512-byte header right, so that the fuzzer gets behind it: IEEE Std 1003.1-2001, "ustar". */
static void put_sums_right(uint8_t *pax, size_t bytes)
{
    for (size_t at = 0; at < bytes; at += 512) {
        unsigned sum = 8 * ' ';

        if (at != 0 && at + 512 != bytes)
            continue;
        for (size_t i = 0; i < 512; i++)
            sum += i >= 148 && i < 156 ? 0 : pax[at + i];
        for (size_t i = 0; i < 6; i++)
            pax[at + 148 + i] = (uint8_t)('0' + (sum >> (15 - 3 * i) & 7));
        pax[at + 154] = '\0';
        pax[at + 155] = ' ';
    }
}

int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size)
{
    static struct firn_about *about;
    struct firn_about_facts facts;
    size_t bytes = size / 512 * 512;
    uint8_t *pax;
    int64_t seconds;
    long nanoseconds;

    if (about == NULL && firn_about_make(firn_memory_system(), &about) != FIRN_OK)
        abort();
    if (bytes == 0 || bytes > 65536)
        return 0;
    pax = malloc(bytes);
    memcpy(pax, data, bytes);
    put_sums_right(pax, bytes);
    for (int content = 0; content < 2; content++) {
        struct firn_item item = {
            .pax = pax, .pax_bytes = bytes, .has_content = content == 1, .bytes = content == 1 ? 37 : 0
        };

        if (firn_about_read(about, &item, &facts) == FIRN_OK && (facts.path == NULL || facts.link == NULL))
            abort();
    }
    if (firn_pax_time_read(pax, bytes, &seconds, &nanoseconds) && (nanoseconds <= 0 || nanoseconds > 999999999))
        abort();
    firn_pax_time_mend(pax, bytes);
    free(pax);
    return 0;
}
