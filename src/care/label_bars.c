/*
 * care/label_bars.c - a shelf-mark as bars: Code 128, ISO/IEC 15417
 *
 * A symbol is a start character, one character for each sign or (code set C) pair of digits, characters that change the
 * code set, a check character modulo 103 and a stop. Every character is three bars and three spaces, 11 modules wide.
 * SPDX-License-Identifier: BSD-2-Clause
 */
#include "care/label_bars.h"

#include <limits.h>
#include <stdbool.h>
#include <string.h>

enum { CODE_C = 99, CODE_B = 100, START_B = 104, START_C = 105, STOP = 106, CHECK_MODULUS = 103 };

enum set { SET_B, SET_C, SETS };

/*
 * Widths of bar, space, bar, space, bar, space by value, 0 to 106; the stop has a bar more. From memory of the
 * standard's table 1; tests/care/test_label_bars.c has every one of them read back by a barcode reader, and checks
 * what the standard asks of each: 11 modules, an even number of them black.
 */
static const char widths[STOP + 1][8] = {
    "212222", "222122", "222221", "121223", "121322", "131222", "122213", "122312", "132212", "221213",
    "221312", "231212", "112232", "122132", "122231", "113222", "123122", "123221", "223211", "221132",
    "221231", "213212", "223112", "312131", "311222", "321122", "321221", "312212", "322112", "322211",
    "212123", "212321", "232121", "111323", "131123", "131321", "112313", "132113", "132311", "211313",
    "231113", "231311", "112133", "112331", "132131", "113123", "113321", "133121", "313121", "211331",
    "231131", "213113", "213311", "213131", "311123", "311321", "331121", "312113", "312311", "332111",
    "314111", "221411", "431111", "111224", "111422", "121124", "121421", "141122", "141221", "112214",
    "112412", "122114", "122411", "142112", "142211", "241211", "221114", "413111", "241112", "134111",
    "111242", "121142", "121241", "114212", "124112", "124211", "411212", "421112", "421211", "212141",
    "214121", "412121", "111143", "111341", "131141", "114113", "114311", "411113", "411311", "113141",
    "114131", "311141", "411131", "211412", "211214", "211232", "2331112"
};

static bool is_pair(const char *at)
{
    return at[0] >= '0' && at[0] <= '9' && at[1] >= '0' && at[1] <= '9';
}

/*
 * How many characters the text from each place on takes, beginning in either set: from the end backwards, the change of
 * set counted. next[i][set]: the set that the sign at i is best written in.
 */
struct plan {
    unsigned cost[FIRN_LABEL_BARS_TEXT_MAX + 2][SETS];
    enum set next[FIRN_LABEL_BARS_TEXT_MAX + 1][SETS];
};

static void make_plan(const char *text, size_t count, struct plan *plan)
{
    memset(plan, 0, sizeof *plan);
    for (size_t i = count; i-- > 0;) {
        unsigned in_b = 1 + plan->cost[i + 1][SET_B];
        unsigned in_c = is_pair(text + i) ? 1 + plan->cost[i + 2][SET_C] : UINT_MAX / 2;

        for (int set = SET_B; set < SETS; set++) {
            unsigned b = in_b + (set != SET_B), c = in_c + (set != SET_C);

            plan->next[i][set] = c < b ? SET_C : SET_B;
            plan->cost[i][set] = c < b ? c : b;
        }
    }
}

/* The characters of the symbol between start and check; returns how many. */
static size_t choose(const char *text, size_t count, uint8_t *values)
{
    struct plan plan;
    size_t used = 0;
    enum set set;

    make_plan(text, count, &plan);
    set = plan.cost[0][SET_C] < plan.cost[0][SET_B] ? SET_C : SET_B;
    values[used++] = set == SET_C ? START_C : START_B;
    for (size_t i = 0; i < count;) {
        enum set wanted = plan.next[i][set];

        if (wanted != set)
            values[used++] = wanted == SET_C ? CODE_C : CODE_B;
        set = wanted;
        if (set == SET_C) {
            values[used++] = (uint8_t)(10 * (text[i] - '0') + text[i + 1] - '0');
            i += 2;
        } else {
            values[used++] = (uint8_t)(text[i++] - ' ');
        }
    }
    return used;
}

static void add(struct firn_label_bars *bars, unsigned value)
{
    for (const char *width = widths[value]; *width != '\0'; width++) {
        bars->widths[bars->count++] = (uint8_t)(*width - '0');
        bars->modules += (unsigned)(*width - '0');
    }
}

enum firn_status firn_label_bars_make(const char *text, struct firn_label_bars *bars)
{
    size_t count = strlen(text), used;
    uint8_t values[2 * FIRN_LABEL_BARS_TEXT_MAX + 1];      /* a change of set before every sign, at worst */
    unsigned check;

    *bars = (struct firn_label_bars){ .count = 0 };
    if (count == 0 || count > FIRN_LABEL_BARS_TEXT_MAX)
        return FIRN_BAD_ARGUMENT;
    for (size_t i = 0; i < count; i++)
        if (text[i] < ' ' || text[i] > '~')
            return FIRN_BAD_ARGUMENT;
    used = choose(text, count, values);
    check = values[0];
    for (size_t i = 0; i < used; i++) {
        add(bars, values[i]);
        check += (unsigned)i * values[i];
    }
    add(bars, check % CHECK_MODULUS);
    add(bars, STOP);
    return FIRN_OK;
}
