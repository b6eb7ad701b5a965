/*
 * guard/locator.h - which bytes of one column are wrong, and by how much, from its syndromes
 *
 * Room: guard. Pure. Used by guard/columns.c. A byte that is wrong by e at the point x of GF(2^8) adds e x^l to
 * syndrome l (0^0 is 1). So the syndromes obey a linear recurrence whose characteristic polynomial, sigma, has the
 * wrong points as its roots, the point 0 like any other; and the sum of e / (z - x) over the wrong points is omega(z)
 * / sigma(z).
 *
 * The shortest recurrence is found by J. L. Massey, "Shift-Register Synthesis and BCH Decoding", IEEE Trans. Inform.
 * Theory 15(1), 1969, pp. 122-127 (title and place from memory); the values follow from omega and the slope of sigma,
 * as in G. D. Forney, "On Decoding BCH Codes", IEEE Trans. Inform. Theory 11(4), 1965, pp. 549-557 (from memory).
 *
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_GUARD_LOCATOR_H
#define FIRN_GUARD_LOCATOR_H

#include <stdbool.h>
#include <stdint.h>

enum { FIRN_LOCATOR_SYNDROMES_MOST = 128, FIRN_LOCATOR_WRONG_MOST = FIRN_LOCATOR_SYNDROMES_MOST / 2 };

/* Logarithms with a place for 0, so that a product is two look-ups and no question: made once for many columns. */
struct firn_locator_logs {
    uint16_t log[256];
    uint8_t power[1024];
};

struct firn_locator {
    unsigned degree;                                  /* how many bytes are wrong, if sigma has as many roots */
    uint8_t sigma[FIRN_LOCATOR_WRONG_MOST + 1];       /* coefficient i of z^i; the highest is 1 */
    uint8_t omega[FIRN_LOCATOR_WRONG_MOST];
};

void firn_locator_make_logs(struct firn_locator_logs *logs);

/*
 * Finds sigma and omega from `count` syndromes, at most FIRN_LOCATOR_SYNDROMES_MOST. False when more than count / 2
 * bytes are wrong: that many cannot be told. When sigma has not as many roots as its degree among the points that may
 * be wrong, more were wrong too, and nothing is known.
 */
bool firn_locator_find(const struct firn_locator_logs *logs, const uint8_t *syndromes, unsigned count,
                       struct firn_locator *locator);

/* By how much the byte at a root of sigma is wrong. 0: no such column. */
uint8_t firn_locator_value(const struct firn_locator_logs *logs, const struct firn_locator *locator, uint8_t root);

#endif
