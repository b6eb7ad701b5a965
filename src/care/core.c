/* care/core.c - a container as a core */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "care/core.h"

#include <inttypes.h>
#include <stdlib.h>

void firn_core_start(struct firn_core *core, uint64_t blocks)
{
    *core = (struct firn_core){ .blocks = blocks };
}

/* Block numbers stay far below 2^57 (a file has at most 2^63 bytes), so the products fit. */
size_t firn_core_slice_of(uint64_t block, uint64_t blocks)
{
    return blocks == 0 ? 0 : (size_t)(block * FIRN_CORE_SLICES / blocks);
}

uint64_t firn_core_first_block(size_t slice, uint64_t blocks)
{
    return (slice * blocks + FIRN_CORE_SLICES - 1) / FIRN_CORE_SLICES;
}

void firn_core_add(struct firn_core *core, uint64_t block, enum firn_scrub_found what)
{
    struct firn_core_slice *slice;

    if (block >= core->blocks)
        return;
    slice = &core->slices[firn_core_slice_of(block, core->blocks)];
    slice->mended += what == FIRN_SCRUB_MENDED;
    slice->rebuilt += what == FIRN_SCRUB_REBUILT;
    slice->lost += what == FIRN_SCRUB_LOST;
    core->places += core->next == 0 || block != core->next;
    core->next = block + 1;
    if (what != FIRN_SCRUB_LOST)
        return;
    core->places_lost += core->next_lost == 0 || block != core->next_lost;
    core->next_lost = block + 1;
}

void firn_core_write(const struct firn_core *core, struct firn_text *text)
{
    const char *before = "";

    for (size_t i = 0; i < FIRN_CORE_SLICES; i++) {
        const struct firn_core_slice *slice = &core->slices[i];

        if (slice->mended + slice->rebuilt + slice->lost == 0)
            continue;
        firn_text_add(text, "%s%zu:%" PRIu64 ",%" PRIu64 ",%" PRIu64, before, i, slice->mended, slice->rebuilt,
                      slice->lost);
        before = ";";
    }
    if (before[0] == '\0')
        firn_text_add(text, "-");
}

/* A number and the sign behind it. */
static bool take_number(const char **at, char sign, uint64_t *number)
{
    char *end;

    if (**at < '0' || **at > '9')
        return false;
    *number = strtoull(*at, &end, 10);
    if (sign != '\0' && *end != sign)
        return false;
    *at = end + (sign != '\0');
    return true;
}

enum firn_status firn_core_read(struct firn_core *core, const char *words)
{
    if (words[0] == '-' && words[1] == '\0')
        return FIRN_OK;
    for (;;) {
        struct firn_core_slice slice;
        uint64_t index;

        if (!take_number(&words, ':', &index) || index >= FIRN_CORE_SLICES || !take_number(&words, ',', &slice.mended)
            || !take_number(&words, ',', &slice.rebuilt) || !take_number(&words, '\0', &slice.lost))
            return FIRN_BAD_DATA;
        core->slices[index] = slice;
        if (*words == '\0')
            return FIRN_OK;
        if (*words++ != ';')
            return FIRN_BAD_DATA;
    }
}
