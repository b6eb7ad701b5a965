/* tests/fuzz/fuzz_media.c - any bytes as a file of media profiles; whatever is read must be good for a forecast */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "firn/forecast.h"

#include <math.h>
#include <stdlib.h>
#include <string.h>

int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size);

int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size)
{
    const struct firn_forecast_plan plan = { .bytes = 1000000, .geometry = { 14, 4, 8 }, .copies = 2, .years = 3,
                                             .interval = 1, .correlation = 0.1 };
    struct firn_forecast_media media;
    struct firn_forecast_profile profile;
    struct firn_forecast_result result;
    struct firn_fault fault;
    unsigned profiles = 0;

    firn_forecast_media_start(&media, (const char *)data, size);
    while (firn_forecast_media_next(&media, &profile, &fault) == FIRN_OK) {
        if (memchr(profile.name, '\0', sizeof profile.name) == NULL)
            abort();
        if (++profiles > 20)
            continue;
        if (firn_forecast_run(&profile.medium, &plan, &result) != FIRN_OK)
            abort();
        for (unsigned cause = 0; cause < FIRN_FORECAST_CAUSES; cause++)
            if (isnan(result.ln_lost[cause]) || result.ln_lost[cause] > 0 || !(result.lost_bytes[cause] >= 0))
                abort();
    }
    return 0;
}
