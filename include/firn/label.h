/*
 * firn/label.h - shelf-marks with a check character, for marks that people copy by hand
 *
 * Room: care. Pure. A mark is letters and digits; blanks and - . / : _ between them are for the eye, are kept, and do
 * not count: a slip in them is not noticed. Lower case counts as upper. The check character is the last that counts.
 *
 * Systems of ISO/IEC 7064:2003, and what they notice (tests/care/test_label.c goes through all cases):
 * - MOD 37-2: letters, digits, and * as a check character. Every single wrong character; every swap of two characters
 *   up to 35 places apart.
 * - MOD 37,36: letters and digits only. Every single wrong character; of swaps of neighbours 72 in 45 360 escape
 *   (0.16 %), of swaps further apart more.
 * - MOD 11-2: digits, and X as a check character. Every single wrong digit; every swap up to 9 places apart.
 *
 * Folding (on request) takes O for 0 and I for 1 everywhere but in the check character: there both would be right for
 * different marks, and taking one for the other would let wrong characters pass elsewhere.
 *
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_LABEL_H
#define FIRN_LABEL_H

#include "firn/status.h"

#include <stdbool.h>
#include <stddef.h>

enum firn_label_system { FIRN_LABEL_MOD_37_2, FIRN_LABEL_MOD_37_36, FIRN_LABEL_MOD_11_2 };

enum { FIRN_LABEL_MARK_MAX = 48, FIRN_LABEL_MARK_ROOM = FIRN_LABEL_MARK_MAX + 1 };      /* check character included */

struct firn_label_rules {
    enum firn_label_system system;
    bool fold;
};

/* "MOD 37-2" */
FIRN_API const char *firn_label_system_name(enum firn_label_system system);

/*
 * The mark as it is written on a label: upper case, blanks around it gone, folded if the rules say so, then a hyphen
 * and the check character.
 *
 * FIRN_OK
 * FIRN_BAD_ARGUMENT  a character that cannot stand in a mark, or no character at all: fault->what says so
 * FIRN_NO_ROOM       longer than FIRN_LABEL_MARK_MAX
 */
FIRN_API enum firn_status firn_label_make(const struct firn_label_rules *rules, const char *mark,
                                          char label[FIRN_LABEL_MARK_ROOM], struct firn_fault *fault);

struct firn_label_verdict {
    bool valid;
    char label[FIRN_LABEL_MARK_ROOM];      /* as judged: upper case, folded */
    char check;                            /* its check character */
    char expected;                         /* the one that the rest of it asks for */
};

/* Judges a label that somebody typed. FIRN_OK, valid or not; else as firn_label_make. */
FIRN_API enum firn_status firn_label_check(const struct firn_label_rules *rules, const char *label,
                                           struct firn_label_verdict *verdict, struct firn_fault *fault);

/* One slip that would explain an invalid label. */
enum firn_label_slip_kind {
    FIRN_LABEL_SLIP_NEIGHBOURS,      /* two characters side by side swapped */
    FIRN_LABEL_SLIP_LOOKALIKE,       /* one character for another that looks like it */
    FIRN_LABEL_SLIP_JUMP,            /* two characters swapped across a third */
    FIRN_LABEL_SLIP_SINGLE,          /* one character for any other */
    FIRN_LABEL_SLIP_FAR              /* two characters further apart swapped */
};

struct firn_label_slip {
    enum firn_label_slip_kind kind;
    unsigned first, second;                /* places in the label, from 0; equal where one character is wrong */
    char found, wanted;                    /* what stands at `first`, and what should */
    char label[FIRN_LABEL_MARK_ROOM];      /* the label put right */
};

/* Return false to hear no more. */
typedef bool (firn_label_slip_teller)(void *self, const struct firn_label_slip *slip);

/*
 * Tells every single wrong character and every swap of two that would make an invalid label valid, the likeliest kinds
 * first: of the slips that people make with numbers about 79 in a hundred are single characters and 10 are swapped
 * neighbours (J. Verhoeff, Error Detecting Decimal Codes, 1969), but a given single one is one of many.
 * FIRN_OK; else as firn_label_check. A valid label has no slips.
 */
FIRN_API enum firn_status firn_label_slips(const struct firn_label_rules *rules, const char *label,
                                           firn_label_slip_teller *tell, void *self, struct firn_fault *fault);

#endif
