/*
 * care/label.c - check characters after ISO/IEC 7064
 *
 * Pure systems MOD M-r: the sum of every character's value times r to the power of its place, counted from 0 at the
 * check character, is 1 modulo M. Hybrid MOD M+1,M: a running value, doubled modulo M+1 after each sum modulo M, is 1.
 * Computed by Horner's rule from the left in both.
 * SPDX-License-Identifier: BSD-2-Clause
 */
#include "firn/label.h"

#include "base/fault.h"
#include "base/text.h"

#include <string.h>

static const char alphabet[] = "0123456789ABCDEFGHIJKLMNOPQRSTUVWXYZ*";

static const struct system {
    const char *name;
    unsigned modulus, radix;      /* radix 0: hybrid */
    unsigned values;              /* of characters before the check character */
    const char *checks;           /* check characters by value */
    const char *letters;          /* what a mark is made of, in words */
} systems[] = {
    [FIRN_LABEL_MOD_37_2] = { "MOD 37-2", 37, 2, 36, alphabet, "letters A to Z and digits" },
    [FIRN_LABEL_MOD_37_36] = { "MOD 37,36", 36, 0, 36, alphabet, "letters A to Z and digits" },
    [FIRN_LABEL_MOD_11_2] = { "MOD 11-2", 11, 2, 10, "0123456789X", "digits" },
};

/* A label taken apart: which characters count, and where they stand. */
struct parsed {
    char text[FIRN_LABEL_MARK_ROOM];
    unsigned count;
    unsigned at[FIRN_LABEL_MARK_MAX];
};

const char *firn_label_system_name(enum firn_label_system system)
{
    return systems[system].name;
}

static int value_of(const char *characters, unsigned count, char c)
{
    for (unsigned value = 0; value < count; value++)
        if (characters[value] == c)
            return (int)value;
    return -1;
}

static unsigned check_count(const struct system *system)
{
    return (unsigned)(system->radix == 0 ? system->modulus : strlen(system->checks));
}

/* --- the arithmetic --- */

/* The state after the characters that stand before the check character. */
static unsigned run(const struct system *system, const struct parsed *label, unsigned characters)
{
    const unsigned m = system->modulus;
    unsigned state = system->radix == 0 ? m : 0;

    for (unsigned i = 0; i < characters; i++) {
        unsigned value = (unsigned)value_of(alphabet, system->values, label->text[label->at[i]]);

        if (system->radix > 0) {
            state = (state + value) * system->radix % m;
        } else {
            state = (state + value) % m;
            state = 2 * (state == 0 ? m : state) % (m + 1);
        }
    }
    return state;
}

static char expected(const struct system *system, const struct parsed *label, unsigned characters)
{
    const unsigned m = system->modulus;

    return system->checks[(m + 1 - run(system, label, characters)) % m];
}

/* All characters can stand where they stand, and the last is the check character of the others. */
static bool is_valid(const struct system *system, const struct parsed *label)
{
    for (unsigned i = 0; i + 1 < label->count; i++)
        if (value_of(alphabet, system->values, label->text[label->at[i]]) < 0)
            return false;
    return expected(system, label, label->count - 1) == label->text[label->at[label->count - 1]];
}

/* --- the words --- */

static bool is_separator(char c)
{
    return c != '\0' && strchr(" -./:_", c) != NULL;
}

static enum firn_status refuse(struct firn_fault *fault, const char *c, size_t left, const struct system *system)
{
    char words[160];
    struct firn_text text;
    size_t step = firn_text_utf8(c, left);
    char shown[8] = "";

    memcpy(shown, c, step == 0 ? 1 : step);
    firn_text_start(&text, words, sizeof words);
    firn_text_add(&text, "'%s' cannot stand there: a mark for %s has %s, with blanks or - . / : _ between them", shown,
                  system->name, system->letters);
    return firn_fault_tell(fault, FIRN_BAD_ARGUMENT, 0, 0, words);
}

static char upper(char c)
{
    return c >= 'a' && c <= 'z' ? (char)(c - 'a' + 'A') : c;
}

/* Takes words apart. Whether each character may stand in its place is asked later: only the last may be a check. */
static enum firn_status parse(const char *words, struct parsed *label, struct firn_fault *fault)
{
    size_t count = strlen(words);

    *label = (struct parsed){ .count = 0 };
    for (; count > 0 && *words == ' '; count--)
        words++;
    while (count > 0 && words[count - 1] == ' ')
        count--;
    if (count > FIRN_LABEL_MARK_MAX)
        return firn_fault_tell(fault, FIRN_NO_ROOM, 0, 0, "a mark has 48 characters at most, its check included");
    for (unsigned i = 0; i < count; i++) {
        label->text[i] = upper(words[i]);
        if (!is_separator(words[i]))
            label->at[label->count++] = i;
    }
    return FIRN_OK;
}

static void fold(struct parsed *label, unsigned characters)
{
    for (unsigned i = 0; i < characters; i++) {
        char *c = &label->text[label->at[i]];

        *c = *c == 'O' ? '0' : *c == 'I' ? '1' : *c;
    }
}

/* The first `characters` must be of the mark's alphabet. */
static enum firn_status examine(const struct system *system, const struct parsed *label, unsigned characters,
                                struct firn_fault *fault)
{
    for (unsigned i = 0; i < characters; i++) {
        const char *c = label->text + label->at[i];

        if (value_of(alphabet, system->values, *c) < 0)
            return refuse(fault, c, strlen(c), system);
    }
    return FIRN_OK;
}

enum firn_status firn_label_make(const struct firn_label_rules *rules, const char *mark,
                                 char label[FIRN_LABEL_MARK_ROOM], struct firn_fault *fault)
{
    const struct system *system = &systems[rules->system];
    struct parsed parsed;
    enum firn_status status = parse(mark, &parsed, fault);
    size_t length;

    if (status != FIRN_OK)
        return status;
    if (parsed.count == 0)
        return firn_fault_tell(fault, FIRN_BAD_ARGUMENT, 0, 0, "a mark needs a letter or a digit");
    if (rules->fold)
        fold(&parsed, parsed.count);
    status = examine(system, &parsed, parsed.count, fault);
    if (status != FIRN_OK)
        return status;
    length = strlen(parsed.text);
    if (length + 2 > FIRN_LABEL_MARK_MAX)
        return firn_fault_tell(fault, FIRN_NO_ROOM, 0, 0, "a mark has 48 characters at most, its check included");
    memcpy(label, parsed.text, length);
    label[length] = '-';
    label[length + 1] = expected(system, &parsed, parsed.count);
    label[length + 2] = '\0';
    return FIRN_OK;
}

/* A label as typed, and folded if the rules say so: all but its last character are the mark. */
static enum firn_status parse_label(const struct firn_label_rules *rules, const char *words, struct parsed *typed,
                                    struct parsed *label, struct firn_fault *fault)
{
    const struct system *system = &systems[rules->system];
    enum firn_status status = parse(words, typed, fault);
    const char *last;

    if (status != FIRN_OK)
        return status;
    if (typed->count < 2)
        return firn_fault_tell(fault, FIRN_BAD_ARGUMENT, 0, 0, "a label needs a mark and a check character");
    *label = *typed;
    if (rules->fold)
        fold(label, label->count - 1);
    status = examine(system, label, label->count - 1, fault);
    last = label->text + label->at[label->count - 1];
    if (status == FIRN_OK && value_of(system->checks, check_count(system), *last) < 0)
        return refuse(fault, last, strlen(last), system);
    return status;
}

enum firn_status firn_label_check(const struct firn_label_rules *rules, const char *label,
                                  struct firn_label_verdict *verdict, struct firn_fault *fault)
{
    const struct system *system = &systems[rules->system];
    struct parsed typed, parsed;
    enum firn_status status = parse_label(rules, label, &typed, &parsed, fault);

    *verdict = (struct firn_label_verdict){ .valid = false };
    if (status != FIRN_OK)
        return status;
    memcpy(verdict->label, parsed.text, sizeof verdict->label);
    verdict->check = parsed.text[parsed.at[parsed.count - 1]];
    verdict->expected = expected(system, &parsed, parsed.count - 1);
    verdict->valid = verdict->check == verdict->expected;
    return FIRN_OK;
}

/* --- slips --- */

/* Characters that are taken for each other in handwriting, print and on worn labels. */
static const char *const lookalikes[] = { "0ODQ", "1IL7", "2Z", "5S", "6G", "8B", "UV", "CG", "EF", "MN", "PR", "VY" };

static bool look_alike(char a, char b)
{
    for (size_t i = 0; i < sizeof lookalikes / sizeof lookalikes[0]; i++)
        if (strchr(lookalikes[i], a) != NULL && strchr(lookalikes[i], b) != NULL)
            return true;
    return false;
}

struct telling {
    const struct system *system;
    bool fold;
    struct parsed label;      /* as typed, with the change that is being tried; a swap may undo what folding hides */
    firn_label_slip_teller *tell;
    void *self;
};

static bool try_slip(struct telling *t, enum firn_label_slip_kind kind, unsigned first, unsigned second, char found)
{
    struct firn_label_slip slip = { .kind = kind, .first = t->label.at[first], .second = t->label.at[second],
                                    .found = found, .wanted = t->label.text[t->label.at[first]] };

    struct parsed label = t->label;

    if (t->fold)
        fold(&label, label.count - 1);
    if (!is_valid(t->system, &label))
        return true;
    memcpy(slip.label, label.text, sizeof slip.label);
    return t->tell(t->self, &slip);
}

/* No label has them: folding would take them for digits. */
static bool is_folded_away(const struct telling *t, char c)
{
    return t->fold && (c == 'O' || c == 'I');
}

static bool try_singles(struct telling *t, enum firn_label_slip_kind kind)
{
    const struct system *system = t->system;
    bool go_on = true;

    for (unsigned i = 0; i < t->label.count && go_on; i++) {
        bool last = i + 1 == t->label.count;
        const char *characters = last ? system->checks : alphabet;
        char *at = &t->label.text[t->label.at[i]], found = *at;

        for (unsigned value = 0; value < (last ? check_count(system) : system->values) && go_on; value++) {
            if (characters[value] == found || (!last && is_folded_away(t, characters[value])) ||
                look_alike(characters[value], found) != (kind == FIRN_LABEL_SLIP_LOOKALIKE))
                continue;
            *at = characters[value];
            go_on = try_slip(t, kind, i, i, found);
        }
        *at = found;
    }
    return go_on;
}

static bool try_swaps(struct telling *t, enum firn_label_slip_kind kind, unsigned nearest, unsigned furthest)
{
    bool go_on = true;

    for (unsigned apart = nearest; apart <= furthest && go_on; apart++)
        for (unsigned i = 0; i + apart < t->label.count && go_on; i++) {
            char *first = &t->label.text[t->label.at[i]], *second = &t->label.text[t->label.at[i + apart]];
            char found = *first, other = *second;

            if (found == other)
                continue;
            *first = other;
            *second = found;
            go_on = try_slip(t, kind, i, i + apart, found);
            *first = found;
            *second = other;
        }
    return go_on;
}

enum firn_status firn_label_slips(const struct firn_label_rules *rules, const char *label, firn_label_slip_teller *tell,
                                  void *self, struct firn_fault *fault)
{
    struct telling t = { .system = &systems[rules->system], .fold = rules->fold, .tell = tell, .self = self };
    struct parsed folded;
    enum firn_status status = parse_label(rules, label, &t.label, &folded, fault);

    if (status != FIRN_OK || is_valid(t.system, &folded))
        return status;
    if (try_swaps(&t, FIRN_LABEL_SLIP_NEIGHBOURS, 1, 1) && try_singles(&t, FIRN_LABEL_SLIP_LOOKALIKE) &&
        try_swaps(&t, FIRN_LABEL_SLIP_JUMP, 2, 2) && try_singles(&t, FIRN_LABEL_SLIP_SINGLE))
        try_swaps(&t, FIRN_LABEL_SLIP_FAR, 3, FIRN_LABEL_MARK_MAX);
    return FIRN_OK;
}
