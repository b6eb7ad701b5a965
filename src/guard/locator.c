/*
 * guard/locator.c - which bytes of one column are wrong, and by how much, from its syndromes
 * SPDX-License-Identifier: BSD-2-Clause
 */
#include "guard/locator.h"

#include "guard/gf.h"

#include <string.h>

enum { LOG_OF_ZERO = 510 };      /* beyond the sum of any two others */

/* A recurrence: s[n] = the sum over i = 1 .. length of c[i] s[n - i], and c[0] = 1. */
struct recurrence {
    unsigned length;
    uint8_t c[FIRN_LOCATOR_SYNDROMES_MOST + 1];
};

void firn_locator_make_logs(struct firn_locator_logs *logs)
{
    for (unsigned i = 0; i < 256; i++)
        logs->log[i] = i == 0 ? LOG_OF_ZERO : firn_gf_log[i];
    memset(logs->power, 0, sizeof logs->power);
    for (unsigned i = 0; i < LOG_OF_ZERO; i++)
        logs->power[i] = firn_gf_power[i % 255];
}

static inline uint8_t product(const struct firn_locator_logs *logs, uint8_t a, uint8_t b)
{
    return logs->power[logs->log[a] + logs->log[b]];
}

static inline uint8_t quotient(const struct firn_locator_logs *logs, uint8_t a, uint8_t b)
{
    return a == 0 ? 0 : logs->power[logs->log[a] + 255U - logs->log[b]];
}

/* By how much syndrome n differs from what the recurrence says. */
static uint8_t discrepancy(const struct firn_locator_logs *logs, const struct recurrence *now, const uint8_t *syndromes,
                           unsigned n)
{
    uint8_t sum = syndromes[n];

    for (unsigned i = 1; i <= now->length; i++)
        sum ^= product(logs, now->c[i], syndromes[n - i]);
    return sum;
}

/*
 * The shortest recurrence of all syndromes. It is at hand, `before` the last one that was shorter, and `age` how many
 * steps ago that one failed, by `its` discrepancy. False as soon as it is longer than count / 2.
 */
static bool find_recurrence(const struct firn_locator_logs *logs, const uint8_t *syndromes, unsigned count,
                            struct recurrence *now)
{
    struct recurrence before = { .length = 0, .c = { 1 } }, kept = before;
    unsigned age = 1;
    uint8_t its = 1;

    *now = before;
    for (unsigned n = 0; n < count; n++, age++) {
        uint8_t d = discrepancy(logs, now, syndromes, n), factor;
        const bool grows = 2 * now->length <= n;

        if (d == 0)
            continue;
        if (grows && n + 1 - now->length > count / 2)
            return false;
        factor = quotient(logs, d, its);
        if (grows)
            kept = *now;
        for (unsigned i = 0; i <= before.length; i++)      /* age + before.length <= n + 1 <= count */
            now->c[i + age] ^= product(logs, factor, before.c[i]);
        if (grows) {
            now->length = n + 1 - now->length;
            before = kept;
            its = d;
            age = 0;
        }
    }
    return true;
}

bool firn_locator_find(const struct firn_locator_logs *logs, const uint8_t *syndromes, unsigned count,
                       struct firn_locator *locator)
{
    struct recurrence found;

    if (!find_recurrence(logs, syndromes, count, &found))
        return false;
    locator->degree = found.length;
    for (unsigned i = 0; i <= found.length; i++)
        locator->sigma[i] = found.c[found.length - i];
    for (unsigned i = 0; i < found.length; i++) {
        locator->omega[i] = 0;
        for (unsigned l = 0; i + l + 1 <= found.length; l++)
            locator->omega[i] ^= product(logs, locator->sigma[i + l + 1], syndromes[l]);
    }
    return true;
}

uint8_t firn_locator_value(const struct firn_locator_logs *logs, const struct firn_locator *locator, uint8_t root)
{
    const uint8_t square = product(logs, root, root);
    uint8_t over = 0, slope = 0;

    for (unsigned i = locator->degree; i-- > 0;)
        over = product(logs, over, root) ^ locator->omega[i];
    /* the slope has the odd coefficients of sigma, at the even powers */
    for (unsigned i = (locator->degree + 1) / 2; i-- > 0;)
        slope = product(logs, slope, square) ^ locator->sigma[2 * i + 1];
    return slope == 0 ? 0 : quotient(logs, over, slope);
}
