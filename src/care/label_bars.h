/*
 * care/label_bars.h - a shelf-mark as bars: Code 128, ISO/IEC 15417
 *
 * Room: care. Pure.
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_CARE_LABEL_BARS_H
#define FIRN_CARE_LABEL_BARS_H

#include "firn/status.h"

#include <stddef.h>
#include <stdint.h>

enum {
    FIRN_LABEL_BARS_TEXT_MAX = 64,
    FIRN_LABEL_BARS_ROOM = 6 * (2 * FIRN_LABEL_BARS_TEXT_MAX + 2) + 7,      /* widths at most */
    FIRN_LABEL_BARS_QUIET = 10                                              /* modules left free on either side */
};

struct firn_label_bars {
    uint8_t widths[FIRN_LABEL_BARS_ROOM];      /* in modules: bar, space, bar, ... bar */
    size_t count;
    unsigned modules;                          /* their sum */
};

/*
 * text: 1 .. FIRN_LABEL_BARS_TEXT_MAX characters of ASCII from blank to ~. As few symbol characters as can be: pairs of
 * digits in code set C where that pays, all else in code set B. FIRN_OK or FIRN_BAD_ARGUMENT.
 */
enum firn_status firn_label_bars_make(const char *text, struct firn_label_bars *bars);

#endif
