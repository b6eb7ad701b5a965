/* tests/fuzz/fuzz_label.c - any words as a mark, and as a label that somebody typed */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "care/label_bars.h"
#include "firn/label.h"

#include <stdlib.h>
#include <string.h>

int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size);

static const struct firn_label_rules *rules;

/* What is told as the right label must be one. */
static bool look(void *self, const struct firn_label_slip *slip)
{
    struct firn_label_verdict verdict;

    (void)self;
    if (firn_label_check(rules, slip->label, &verdict, NULL) != FIRN_OK || !verdict.valid)
        abort();
    return true;
}

int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size)
{
    char words[200], label[FIRN_LABEL_MARK_ROOM];
    struct firn_label_verdict verdict;
    struct firn_label_bars bars;
    struct firn_fault fault;
    struct firn_label_rules mine;

    if (size < 1 || size >= sizeof words)
        return 0;
    mine = (struct firn_label_rules){ (enum firn_label_system)(data[0] % 3), data[0] >= 128 };
    rules = &mine;
    memcpy(words, data + 1, size - 1);
    words[size - 1] = '\0';
    if (firn_label_make(rules, words, label, &fault) == FIRN_OK) {
        if (firn_label_check(rules, label, &verdict, &fault) != FIRN_OK || !verdict.valid)
            abort();
        if (firn_label_bars_make(label, &bars) != FIRN_OK || bars.count > FIRN_LABEL_BARS_ROOM)
            abort();
    }
    if (firn_label_check(rules, words, &verdict, &fault) == FIRN_OK)
        firn_label_slips(rules, words, look, NULL, &fault);
    firn_label_bars_make(words, &bars);
    return 0;
}
