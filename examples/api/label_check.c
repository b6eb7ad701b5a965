/* examples/api/label_check.c - shelf-marks that people typed, one a line: which are right, what explains the rest */
/* SPDX-License-Identifier: BSD-2-Clause */
#include <firn/label.h>

#include <stdio.h>
#include <string.h>

static bool tell(void *self, const struct firn_label_slip *slip)
{
    unsigned *told = self;

    if (slip->kind == FIRN_LABEL_SLIP_NEIGHBOURS || slip->kind == FIRN_LABEL_SLIP_JUMP)
        printf("    %s, if characters %u and %u were swapped\n", slip->label, slip->first + 1, slip->second + 1);
    else if (slip->kind == FIRN_LABEL_SLIP_LOOKALIKE)
        printf("    %s, if %c was taken for %c\n", slip->label, slip->wanted, slip->found);
    else
        return false;      /* the rest are any of many: look at the medium again */
    return ++*told < 3;
}

int main(void)
{
    const struct firn_label_rules rules = { .system = FIRN_LABEL_MOD_37_2, .fold = true };
    char line[256];
    int wrong = 0;

    while (fgets(line, sizeof line, stdin) != NULL) {
        struct firn_label_verdict verdict;
        struct firn_fault fault = { 0 };
        unsigned told = 0;

        line[strcspn(line, "\n")] = '\0';
        if (firn_label_check(&rules, line, &verdict, &fault) != FIRN_OK) {
            printf("%s: cannot be a shelf-mark: %s\n", line, fault.what);
            wrong++;
        } else if (verdict.valid) {
            printf("%s: right\n", verdict.label);
        } else {
            printf("%s: WRONG; perhaps\n", verdict.label);
            firn_label_slips(&rules, line, tell, &told, &fault);
            wrong++;
        }
    }
    return wrong > 0 ? 65 : 0;
}
