/*
 * tests/care/test_label_bars.c - bars of Code 128: what the standard asks of every character, as few of them as can
 * be, and every sign read back by a barcode reader that is not ours (zbarimg of Debian's zbar-tools)
 */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "care/label_bars.h"

#include "guard/random.h"
#include "help/scratch.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <cmocka.h>

#include <stdbool.h>
#include <string.h>

enum { MODULE_PIXELS = 3, HEIGHT = 40 };

/* Draws the bars as a grey picture (Netpbm's PGM), quiet zones left and right. */
static void draw(const struct firn_label_bars *bars, const char *name)
{
    unsigned width = (bars->modules + 2 * FIRN_LABEL_BARS_QUIET) * MODULE_PIXELS;
    size_t room = 32 + (size_t)width * HEIGHT, used;
    uint8_t *picture = malloc(room), *row;

    assert_non_null(picture);
    memset(picture, 255, room);
    used = (size_t)snprintf((char *)picture, 32, "P5\n%u %d\n255\n", width, HEIGHT);
    row = picture + used;
    for (size_t i = 0, at = FIRN_LABEL_BARS_QUIET * MODULE_PIXELS; i < bars->count; i++) {
        if (i % 2 == 0)
            memset(row + at, 0, bars->widths[i] * MODULE_PIXELS);
        else
            memset(row + at, 255, bars->widths[i] * MODULE_PIXELS);
        at += bars->widths[i] * MODULE_PIXELS;
    }
    for (unsigned line = 1; line < HEIGHT; line++)
        memcpy(row + (size_t)line * width, row, width);
    scratch_write(name, picture, used + (size_t)width * HEIGHT, 0600);
    free(picture);
}

/* What the barcode reader makes of the picture. */
static void read_back(const char *name, char words[256])
{
    char command[SCRATCH_PATH_ROOM + 100];
    FILE *reader;
    size_t count;

    snprintf(command, sizeof command, "zbarimg --quiet --raw -Sdisable -Scode128.enable '%s' 2>/dev/null",
             scratch_path(name));
    reader = popen(command, "r");
    assert_non_null(reader);
    count = fread(words, 1, 255, reader);
    if (pclose(reader) != 0)
        fail_msg("zbarimg reads nothing: is zbar-tools installed? (tests/needs test)");
    words[count] = '\0';
    if (count > 0 && words[count - 1] == '\n')
        words[count - 1] = '\0';
}

static void comes_back(const char *text)
{
    struct firn_label_bars bars;
    char words[256];

    assert_int_equal(firn_label_bars_make(text, &bars), FIRN_OK);
    draw(&bars, "bars.pgm");
    read_back("bars.pgm", words);
    assert_string_equal(words, text);
}

/* Every sign from blank to ~, in code set B; they stand in threes so that no two digits make a pair. */
static void every_sign_comes_back(void **state)
{
    char text[FIRN_LABEL_BARS_TEXT_MAX];
    unsigned used = 0;

    for (char c = ' '; c <= '~'; c++) {
        text[used++] = c;
        if (c >= '0' && c <= '9')
            text[used++] = '-';
        if (used >= 30 || c == '~') {
            text[used] = '\0';
            comes_back(text);
            used = 0;
        }
    }
    (void)state;
}

/* Every pair of digits, in code set C. */
static void every_pair_comes_back(void **state)
{
    for (unsigned first = 0; first < 100; first += 20) {
        char text[FIRN_LABEL_BARS_TEXT_MAX];

        for (unsigned i = 0; i < 20; i++) {
            text[2 * i] = (char)('0' + (first + i) / 10);
            text[2 * i + 1] = (char)('0' + (first + i) % 10);
        }
        text[40] = '\0';
        comes_back(text);
    }
    (void)state;
}

/* The check character by the standard's rule for texts in code set B alone: start 104, then places times values. */
static unsigned check_of(const char *text)
{
    unsigned sum = 104;

    for (unsigned i = 0; text[i] != '\0'; i++)
        sum += (i + 1) * (unsigned)(text[i] - ' ');
    return sum % 103;
}

/* Some characters, 101 and 102, stand nowhere but as a check. */
static void every_check_character_comes_back(void **state)
{
    bool seen[103] = { false };
    unsigned count = 0;

    for (char a = 'A'; a <= 'Z'; a++)
        for (char b = 'A'; b <= 'Z'; b++) {
            const char text[] = { 'K', a, b, '\0' };

            if (seen[check_of(text)])
                continue;
            seen[check_of(text)] = true;
            count++;
            comes_back(text);
        }
    assert_int_equal(count, 103);
    (void)state;
}

/* Marks as they are; changes of set at the beginning, inside, at the end. */
static void marks_come_back(void **state)
{
    static const char *const marks[] = { "MQ 1931/7-H", "7", "1931-X", "A19310507", "19310507A", "A193105B07", "12345",
                                         "A12345", "MQ.1234.5678-*", "123", "AB12CD", "AB1234CD", "AB123456CD" };
    struct random random = random_start("marks_come_back");

    for (size_t i = 0; i < sizeof marks / sizeof marks[0]; i++)
        comes_back(marks[i]);
    for (unsigned round = 0; round < 40; round++) {
        static const char letters[] = "0123456789ABCDEFGHIJKLMNOPQRSTUVWXYZ*-/. 01234567890123456789";
        unsigned count = 2 + random_below(&random, 30);
        char text[40];

        for (unsigned i = 0; i < count; i++)
            text[i] = letters[random_below(&random, sizeof letters - 1)];
        text[0] = text[count - 1] = 'K';      /* the reader trims blanks */
        text[count] = '\0';
        comes_back(text);
    }
    (void)state;
}

/* ISO/IEC 15417: every character is 11 modules, an even number of them black; the stop 13. */
static void characters_are_well_formed(void **state)
{
    for (unsigned i = 0; i < 95; i++) {
        const char text[] = { (char)(' ' + i), '\0' };
        struct firn_label_bars bars;

        assert_int_equal(firn_label_bars_make(text, &bars), FIRN_OK);
        assert_int_equal(bars.count, 3 * 6 + 7);
        assert_int_equal(bars.modules, 3 * 11 + 13);
        for (size_t at = 0; at + 7 < bars.count; at += 6) {
            int black = bars.widths[at] + bars.widths[at + 2] + bars.widths[at + 4];

            assert_int_equal(black % 2, 0);
            assert_int_equal(black + bars.widths[at + 1] + bars.widths[at + 3] + bars.widths[at + 5], 11);
        }
    }
    (void)state;
}

/* The least number of characters between start and check, found by trying everything. */
static unsigned least(const char *text, bool in_c)
{
    unsigned single = 1, pair = 1000;

    if (*text == '\0')
        return 0;
    single += least(text + 1, false) + in_c;
    if (text[0] >= '0' && text[0] <= '9' && text[1] >= '0' && text[1] <= '9')
        pair = 1 + least(text + 2, true) + !in_c;
    return single < pair ? single : pair;
}

static void no_shorter_symbol_exists(void **state)
{
    struct random random = random_start("no_shorter_symbol_exists");

    for (unsigned round = 0; round < 3000; round++) {
        unsigned count = 1 + random_below(&random, 14), from_b, from_c;
        struct firn_label_bars bars;
        char text[16];

        for (unsigned i = 0; i < count; i++)
            text[i] = "0123456789A-"[random_below(&random, 12)];
        text[count] = '\0';
        assert_int_equal(firn_label_bars_make(text, &bars), FIRN_OK);
        from_b = least(text, false);
        from_c = least(text, true);
        assert_int_equal(bars.modules, 11 * (2 + (from_b < from_c ? from_b : from_c)) + 13);
    }
    (void)state;
}

static void refuses_other_signs(void **state)
{
    struct firn_label_bars bars;
    char text[FIRN_LABEL_BARS_TEXT_MAX + 2];

    assert_int_equal(firn_label_bars_make("", &bars), FIRN_BAD_ARGUMENT);
    assert_int_equal(firn_label_bars_make("A\nB", &bars), FIRN_BAD_ARGUMENT);
    assert_int_equal(firn_label_bars_make("\x7F", &bars), FIRN_BAD_ARGUMENT);
    assert_int_equal(firn_label_bars_make("\xC3\xA9", &bars), FIRN_BAD_ARGUMENT);
    memset(text, 'A', sizeof text);
    text[FIRN_LABEL_BARS_TEXT_MAX] = '\0';
    assert_int_equal(firn_label_bars_make(text, &bars), FIRN_OK);
    /* the most room: a change of set before every sign cannot be, but long texts must fit */
    for (unsigned i = 0; i < FIRN_LABEL_BARS_TEXT_MAX; i++)
        text[i] = i % 7 < 6 ? '1' : 'A';
    assert_int_equal(firn_label_bars_make(text, &bars), FIRN_OK);
    text[FIRN_LABEL_BARS_TEXT_MAX] = 'A';
    text[FIRN_LABEL_BARS_TEXT_MAX + 1] = '\0';
    assert_int_equal(firn_label_bars_make(text, &bars), FIRN_BAD_ARGUMENT);
    (void)state;
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(every_sign_comes_back),
        cmocka_unit_test(every_pair_comes_back),
        cmocka_unit_test(every_check_character_comes_back),
        cmocka_unit_test(marks_come_back),
        cmocka_unit_test(characters_are_well_formed),
        cmocka_unit_test(no_shorter_symbol_exists),
        cmocka_unit_test(refuses_other_signs),
    };
    int failed;

    scratch_make();
    failed = cmocka_run_group_tests(tests, NULL, NULL);
    scratch_remove();
    return failed;
}
