/*
 * coding/hasty.c - greedy with one look, lazy with several
 * SPDX-License-Identifier: BSD-2-Clause
 */
#include "coding/hasty.h"

#include "coding/repeats.h"

#include "base/bytes.h"
#include "base/log2.h"

#include <string.h>

enum {
    HASHED = 4,                        /* bytes */
    GOOD_LENGTH = 48,                  /* no search for a better one */
    PATIENCE_BITS = 6,                 /* after 2^6 places without a match every second is skipped, and so on */
    STRIDE_MAX = 15,                   /* skipped at a time, so that what comes twice is found between what does not */
    STRIDE_MAX_GREEDY = 63
};

struct hasty {
    const uint8_t *raw;
    size_t raw_bytes;
    struct firn_hasty_work *w;
    unsigned tries;
    uint32_t recent[FIRN_MATCHED_RECENT];
};

struct find {
    uint32_t length, distance;
    int worth;                         /* about the bits saved */
};

static uint32_t hash_of(const uint8_t *at)
{
    return firn_bytes_get32(at) * 2654435761u >> (32 - FIRN_HASTY_HASH_BITS);
}

/* Puts the place into the table; returns the place before of the same hash, plus one. */
static inline uint32_t enter(struct hasty *h, size_t at)
{
    uint32_t *head = &h->w->heads[hash_of(h->raw + at)], was = *head;

    *head = (uint32_t)at + 1;
    if (h->tries > 1)
        h->w->before[at] = was;
    return was;
}

/* The best match at a place that has at least HASHED bytes before the end. */
static struct find look(struct hasty *h, size_t at)
{
    struct find best = { 0, 0, 0 };
    const uint8_t *here = h->raw + at;
    uint32_t most = (uint32_t)(h->raw_bytes - at), word = firn_bytes_get32(here), next = enter(h, at);

    for (unsigned k = 0; k < (h->tries > 1 ? 2u : 1u); k++) {
        uint32_t distance = h->recent[k], length;

        if (distance > at || ((firn_bytes_get32(here - distance) ^ word) & 0xFFFFFF) != 0)
            continue;
        length = 3 + firn_repeats_equal(here + 3, here + 3 - distance, most - 3);
        if ((int)(6 * length) - 4 > best.worth)
            best = (struct find){ length, distance, (int)(6 * length) - 4 };
    }
    for (unsigned tries = h->tries; next != 0 && tries > 0; tries--) {
        size_t other = next - 1;

        if (firn_bytes_get32(h->raw + other) == word &&
            (best.length == 0 || best.length >= most || h->raw[other + best.length] == here[best.length])) {
            uint32_t length = HASHED + firn_repeats_equal(here + HASHED, h->raw + other + HASHED, most - HASHED);
            int worth = (int)(6 * length) - (int)firn_log2((uint32_t)(at - other)) - 8;

            if (worth > best.worth)
                best = (struct find){ length, (uint32_t)(at - other), worth };
            if (length >= GOOD_LENGTH)
                break;
        }
        if (h->tries == 1)
            break;
        next = h->w->before[other];
    }
    return best;
}

size_t firn_hasty_parse(const uint8_t *raw, size_t raw_bytes, unsigned tries, struct firn_matched_command *commands,
                        struct firn_hasty_work *work)
{
    struct hasty h = { .raw = raw, .raw_bytes = raw_bytes, .w = work, .tries = tries };
    size_t at = 1, start = 0, made = 0, end = raw_bytes < HASHED + 1 ? 0 : raw_bytes - HASHED;

    memset(work->heads, 0, sizeof work->heads);
    firn_matched_recent_start(h.recent);
    if (end > 0)
        enter(&h, 0);
    while (at < end) {
        struct find found = look(&h, at);

        if (found.worth <= 0) {
            size_t stride = (at - start) >> PATIENCE_BITS, most = tries > 1 ? STRIDE_MAX : STRIDE_MAX_GREEDY;
            size_t next = at + 1 + (stride < most ? stride : most);

            if (tries > 1)
                for (at++; at < next && at < end; at++)
                    enter(&h, at);
            at = next;
            continue;
        }
        while (tries > 1 && found.length < GOOD_LENGTH && at + 1 < end) {
            struct find later = look(&h, at + 1);

            if (later.worth <= found.worth + 4)
                break;
            found = later;
            at++;
        }
        while (at > start && found.distance < at && raw[at - 1] == raw[at - 1 - found.distance]) {
            at--;
            found.length++;
        }
        commands[made++] = (struct firn_matched_command){ (uint32_t)(at - start), found.length, found.distance };
        firn_matched_recall(h.recent, found.distance);
        start = at + found.length;
        if (tries > 1)
            for (at += 2; at < start && at < end; at++)
                enter(&h, at);
        else if (start - 2 < end)
            enter(&h, start - 2);
        at = start;
    }
    if (start < raw_bytes || made == 0)
        commands[made++] = (struct firn_matched_command){ (uint32_t)(raw_bytes - start), 0, 0 };
    return made;
}
