/*
 * coding/matched.c - the classes of runs and lengths
 * SPDX-License-Identifier: BSD-2-Clause
 */
#include "coding/matched.h"

const struct firn_matched_class firn_matched_runs[FIRN_MATCHED_RUN_CODES] = {
    { 0, 0 },  { 1, 0 },  { 2, 0 },  { 3, 0 },  { 4, 0 },  { 5, 0 },  { 6, 1 },   { 8, 1 },
    { 10, 2 }, { 14, 3 }, { 22, 4 }, { 38, 5 }, { 70, 6 }, { 134, 9 }, { 646, 13 }, { 8838, 20 },
};

const struct firn_matched_class firn_matched_lengths[FIRN_MATCHED_LENGTH_CODES] = {
    { 2, 0 },   { 3, 0 },   { 4, 0 },   { 5, 0 },   { 6, 0 },   { 7, 0 },   { 8, 0 },    { 9, 0 },
    { 10, 0 },  { 11, 0 },  { 12, 0 },  { 13, 0 },  { 14, 0 },  { 15, 0 },  { 16, 0 },   { 17, 0 },
    { 18, 1 },  { 20, 1 },  { 22, 2 },  { 26, 2 },  { 30, 3 },  { 38, 3 },  { 46, 4 },   { 62, 4 },
    { 78, 5 },  { 110, 5 }, { 142, 6 }, { 206, 7 }, { 334, 8 }, { 590, 10 }, { 1614, 13 }, { 9806, 20 },
};

static unsigned class_of(const struct firn_matched_class *classes, unsigned count, uint32_t value)
{
    unsigned code = count - 1;

    while (classes[code].base > value)
        code--;
    return code;
}

unsigned firn_matched_run_code(uint32_t literals)
{
    return literals < 6 ? literals : class_of(firn_matched_runs, FIRN_MATCHED_RUN_CODES, literals);
}

unsigned firn_matched_length_code(uint32_t length)
{
    return length < 18 ? length - FIRN_MATCHED_LENGTH_MIN
                       : class_of(firn_matched_lengths, FIRN_MATCHED_LENGTH_CODES, length);
}
