/*
 * tests/care/test_history.c - what scrubs have found over time: kept, read again, joined, judged; and the core
 *
 * SPDX-License-Identifier: BSD-2-Clause
 */
#include "care/history.h"

#include "guard/random.h"
#include "help/fault_memory.h"
#include "help/scratch.h"

#include <inttypes.h>
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/stat.h>
#include <unistd.h>

#include <cmocka.h>

#define COUNT(array) (sizeof(array) / sizeof(array)[0])

enum { DAY = 86400 };

/* ---- the core ---- */

/* Every block is in the slice whose first block is the last one not behind it. */
static void slices_are_whole(void **state)
{
    static const uint64_t sizes[] = { 1, 2, 7, 119, 120, 121, 32768, UINT64_C(1) << 51 };

    (void)state;
    for (size_t i = 0; i < COUNT(sizes); i++) {
        assert_int_equal(firn_core_first_block(0, sizes[i]), 0);
        assert_int_equal(firn_core_first_block(FIRN_CORE_SLICES, sizes[i]), sizes[i]);
        assert_int_equal(firn_core_slice_of(0, sizes[i]), 0);
        for (size_t slice = 0; slice < FIRN_CORE_SLICES; slice++) {
            uint64_t first = firn_core_first_block(slice, sizes[i]), next = firn_core_first_block(slice + 1, sizes[i]);

            assert_true(first <= next);
            if (first == next)
                continue;
            assert_int_equal(firn_core_slice_of(first, sizes[i]), slice);
            assert_int_equal(firn_core_slice_of(next - 1, sizes[i]), slice);
        }
    }
}

static void counts_places(void **state)
{
    struct firn_core core;

    (void)state;
    firn_core_start(&core, 1200);
    firn_core_add(&core, 0, FIRN_SCRUB_REBUILT);
    firn_core_add(&core, 1, FIRN_SCRUB_LOST);
    firn_core_add(&core, 2, FIRN_SCRUB_MENDED);
    firn_core_add(&core, 4, FIRN_SCRUB_LOST);
    firn_core_add(&core, 5, FIRN_SCRUB_LOST);
    firn_core_add(&core, 1199, FIRN_SCRUB_MENDED);
    firn_core_add(&core, 1200, FIRN_SCRUB_MENDED);      /* no such block */
    assert_int_equal(core.places, 3);
    assert_int_equal(core.places_lost, 2);
    assert_int_equal(core.slices[0].mended, 1);
    assert_int_equal(core.slices[0].rebuilt, 1);
    assert_int_equal(core.slices[0].lost, 3);
    assert_int_equal(core.slices[119].mended, 1);
}

static void cores_come_back(void **state)
{
    static const char *const bad[] = {
        "", "x", "3", "3:1,2", "3:1,2,x", "120:1,1,1", "1:1,1,1;", "1:1,1,1,", "-1:1,1,1"
    };
    struct random dice = random_start("core");
    char words[FIRN_CORE_WORDS_ROOM];
    struct firn_core core, back;
    struct firn_text text;

    (void)state;
    for (unsigned round = 0; round < 50; round++) {
        firn_core_start(&core, 100000);
        for (uint64_t block = 0; block < 100000; block += 1 + random_below(&dice, 1U << (1 + round % 16)))
            firn_core_add(&core, block, (enum firn_scrub_found)random_below(&dice, 3));
        firn_text_start(&text, words, sizeof words);
        firn_core_write(&core, &text);
        assert_false(text.cut);
        firn_core_start(&back, 100000);
        assert_int_equal(firn_core_read(&back, words), FIRN_OK);
        assert_memory_equal(back.slices, core.slices, sizeof core.slices);
    }
    for (size_t i = 0; i < FIRN_CORE_SLICES; i++)      /* the longest there can be */
        core.slices[i] = (struct firn_core_slice){ UINT64_MAX, UINT64_MAX, UINT64_MAX };
    firn_text_start(&text, words, sizeof words);
    firn_core_write(&core, &text);
    assert_false(text.cut);
    for (size_t i = 0; i < COUNT(bad); i++)
        assert_int_equal(firn_core_read(&back, bad[i]), FIRN_BAD_DATA);
}

/* ---- the file ---- */

static const uint8_t one[8] = { 1, 2, 3 }, other[8] = { 9 };

static struct firn_history *open_history(const char *path)
{
    struct firn_history *history;
    struct firn_fault fault;

    assert_int_equal(firn_history_open(scratch_path("state"), path, firn_memory_system(), &history, &fault), FIRN_OK);
    return history;
}

static struct firn_history_entry entry(const uint8_t id[8], int64_t day, uint64_t places, uint64_t left)
{
    struct firn_history_entry made = {
        .began = day * DAY, .at = day * DAY + 60, .file_bytes = 4100096, .blocks = 1000, .reached = 1000, .done = true,
        .mended = places, .places = places, .left = left
    };

    memcpy(made.id, id, sizeof made.id);
    return made;
}

static void add(struct firn_history *history, const struct firn_history_entry *made)
{
    struct firn_core core;
    struct firn_fault fault;

    firn_core_start(&core, made->blocks);
    core.slices[7].mended = made->mended;
    core.slices[9].lost = made->lost;
    assert_int_equal(firn_history_add(history, made, &core, &fault), FIRN_OK);
}

static void keeps_what_it_is_told(void **state)
{
    struct firn_history_entry made = {
        .began = 1796083200, .at = 1796083260, .id = { 0x3f, 0x2a, 0, 1, 2, 3, 4, 0xff }, .file_bytes = 11,
        .blocks = 99, .reached = 98, .mended = 13, .mended_bits = 14, .rebuilt = 15, .lost = 16, .unreadable = 17,
        .written = 18, .places = 19, .left = 20, .title_damaged = true, .end_missing = true
    };
    struct firn_history *history = open_history(scratch_path("a.firn"));

    (void)state;
    assert_int_equal(history->count, 0);
    assert_int_equal(firn_history_last_done(history), 0);
    add(history, &made);
    firn_history_close(history);
    history = open_history(scratch_path("./a.firn"));      /* the same place in another spelling */
    assert_int_equal(history->count, 1);
    assert_memory_equal(history->entries, &made, sizeof made);
    assert_int_equal(history->core.slices[7].mended, 13);
    assert_int_equal(history->core.slices[9].lost, 16);
    assert_int_equal(history->core.blocks, 99);
    assert_int_equal(firn_history_last_done(history), 0);      /* it was not done */
    firn_history_close(history);
    history = open_history(scratch_path("b.firn"));
    assert_int_equal(history->count, 0);
    firn_history_close(history);
}

/* Night after night: each part stands for those before it, and the next run learns where to go on. */
static void joins_parts(void **state)
{
    struct firn_history_entry part = entry(one, 100, 1, 0);
    struct firn_history *history;

    (void)state;
    for (unsigned night = 0; night < 4; night++) {
        history = open_history(scratch_path("a.firn"));
        if (night == 0)
            add(history, (struct firn_history_entry[]){ entry(one, 50, 0, 0) });
        else
            assert_int_equal(firn_history_open_turn(history, one, 1000)->reached, 250 * night);
        assert_int_equal(firn_history_last_done(history), 50 * DAY + 60);
        assert_null(firn_history_open_turn(history, other, 1000));
        assert_null(firn_history_open_turn(history, one, 1001));
        part.at = (100 + night) * DAY + 60;
        part.reached = 250 * (night + 1);
        part.done = night == 3;
        add(history, &part);
        firn_history_close(history);
    }
    history = open_history(scratch_path("a.firn"));
    assert_int_equal(history->count, 2);
    assert_null(firn_history_open_turn(history, one, 1000));
    assert_int_equal(firn_history_last_done(history), 103 * DAY + 60);
    firn_history_close(history);
}

/* A scrub in three parts: the first repairs, the second only looks, the third repairs but cannot mend all. */
static void counts_what_is_left(void **state)
{
    static const struct { bool repaired; uint64_t mended_at, lost_at, left; } parts[] = {
        { true, 10, 0, 0 }, { false, 30, 40, 2 }, { true, 50, 60, 3 }
    };
    struct firn_history *history = open_history(scratch_path("a.firn"));
    struct firn_history_entry made = { .began = 5, .blocks = 100 };
    struct firn_core core;

    (void)state;
    firn_core_start(&core, 100);
    for (size_t i = 0; i < COUNT(parts); i++) {
        struct firn_scrub_report report = { .blocks = 100, .reached = 30 * (i + 1), .end_known = true };
        struct firn_fault fault;

        firn_core_add(&core, parts[i].mended_at, FIRN_SCRUB_MENDED);
        report.mended = 1;
        if (parts[i].lost_at > 0) {
            firn_core_add(&core, parts[i].lost_at, FIRN_SCRUB_LOST);
            report.lost = 1;
        }
        made.at = (int64_t)(10 * (i + 1));
        firn_history_count(&made, &report, &core, parts[i].repaired);
        assert_int_equal(firn_history_add(history, &made, &core, &fault), FIRN_OK);
        firn_history_close(history);
        history = open_history(scratch_path("a.firn"));
        made = *firn_history_open_turn(history, made.id, 100);
        core = history->core;
        assert_int_equal(made.left, parts[i].left);
    }
    assert_int_equal(history->count, 1);
    assert_int_equal(made.mended, 3);
    assert_int_equal(made.lost, 2);
    assert_int_equal(made.places, 5);
    assert_int_equal(made.reached, 90);
    firn_history_close(history);
}

/* What is damaged in the file itself costs the lines concerned. */
static void passes_over_nonsense(void **state)
{
    struct firn_history *history = open_history(scratch_path("a.firn"));
    char name[256];
    FILE *file;

    (void)state;
    add(history, (struct firn_history_entry[]){ entry(one, 1, 3, 0) });
    (void)snprintf(name, sizeof name, "%s", history->file);
    firn_history_close(history);
    file = fopen(name, "a");
    assert_non_null(file);
    fputs("nonsense\n\nid=01 at=5 blocks=7\nid=0102030000000000 at=x blocks=7\n", file);
    fputs("id=0102030000000000 at=99 began=98 blocks=7 reached=8\n", file);               /* further than its end */
    fputs("id=0102030000000000 at=90 began=98 blocks=7 reached=7\n", file);               /* over before it began */
    fputs("id=0102030000000000 at=99 began=98 blocks=7 reached=7 core=7:1,1\n", file);
    fputs("id=0102030000000000 at=999 began=98 blocks=7 reached=7 done=1 colour=blue core=-\n", file);      /* good */
    fputs("at=7", file);                                                                  /* torn by a power cut */
    assert_int_equal(fwrite("\0\0", 1, 2, file), 2);
    assert_int_equal(fclose(file), 0);
    history = open_history(scratch_path("a.firn"));
    assert_int_equal(history->count, 2);
    assert_int_equal(history->entries[1].at, 999);
    add(history, (struct firn_history_entry[]){ entry(one, 2, 3, 0) });
    firn_history_close(history);
    history = open_history(scratch_path("a.firn"));
    assert_int_equal(history->count, 3);
    assert_int_equal(history->entries[2].at, 2 * DAY + 60);
    firn_history_close(history);
}

static void forgets_the_oldest(void **state)
{
    struct firn_history *history = open_history(scratch_path("a.firn"));

    (void)state;
    for (int64_t day = 0; day < FIRN_HISTORY_MAX + 10; day++)
        add(history, (struct firn_history_entry[]){ entry(one, day, 1, 0) });
    firn_history_close(history);
    history = open_history(scratch_path("a.firn"));
    assert_int_equal(history->count, FIRN_HISTORY_MAX);
    assert_int_equal(history->entries[0].began, 10 * DAY);
    firn_history_close(history);
}

/* Without a folder it lives as long as the run; with one that cannot be written it says so, and lives on. */
static void lives_without_a_folder(void **state)
{
    struct firn_history_entry made = entry(one, 1, 3, 0);
    struct firn_history *history;
    struct firn_core core;
    struct firn_fault fault;

    (void)state;
    firn_core_start(&core, made.blocks);
    assert_int_equal(firn_history_open(NULL, scratch_path("a.firn"), firn_memory_system(), &history, &fault), FIRN_OK);
    assert_int_equal(firn_history_add(history, &made, &core, &fault), FIRN_OK);
    assert_int_equal(history->count, 1);
    firn_history_close(history);
    assert_int_equal(firn_history_open(scratch_path("nowhere"), scratch_path("a.firn"), firn_memory_system(), &history,
                                       &fault), FIRN_OK);
    assert_int_equal(firn_history_add(history, &made, &core, &fault), FIRN_CANNOT_CREATE);
    assert_int_equal(history->count, 1);
    firn_history_close(history);
    assert_int_equal(firn_history_open(NULL, scratch_path("c.firn"), firn_memory_system(), &history, &fault),
                     FIRN_NO_INPUT);
    assert_null(history);
}

static void lives_without_memory(void **state)
{
    struct firn_history *first = open_history(scratch_path("a.firn"));
    enum firn_status status = FIRN_NO_MEMORY;

    (void)state;
    add(first, (struct firn_history_entry[]){ entry(one, 1, 3, 0) });
    firn_history_close(first);
    for (unsigned n = 1; status != FIRN_OK; n++) {
        struct fault_memory memory;
        struct firn_history *history;
        struct firn_fault fault;

        fault_memory_make(&memory, n);
        status = firn_history_open(scratch_path("state"), scratch_path("a.firn"), &memory.memory, &history, &fault);
        assert_true(status == FIRN_OK || status == FIRN_NO_MEMORY);
        firn_history_close(history);
        assert_int_equal(memory.outstanding, 0);
    }
}

/* ---- intervals ---- */

struct told { const uint8_t *id; int64_t day; uint64_t places, left; bool broken_off; };

static const struct interval_case {
    const char *what;
    struct told told[6];
    size_t count;
    struct firn_trend_interval wanted[6];
} interval_cases[] = {
    { "repaired each time", { { one, 0, 5, 0, false }, { one, 30, 2, 0, false }, { one, 90, 3, 0, false } }, 2,
      { { 30.0 * DAY, 2 }, { 60.0 * DAY, 3 } } },
    { "only reported: found again, counted once",
      { { one, 0, 5, 5, false }, { one, 30, 7, 7, false }, { one, 60, 7, 7, false }, { one, 90, 6, 6, false } }, 3,
      { { 30.0 * DAY, 2 }, { 30.0 * DAY, 0 }, { 30.0 * DAY, 0 } } },
    { "some stay lost", { { one, 0, 5, 2, false }, { one, 30, 3, 2, false }, { one, 60, 2, 2, false } }, 2,
      { { 30.0 * DAY, 1 }, { 30.0 * DAY, 0 } } },
    { "one that was never finished", { { one, 0, 0, 0, false }, { one, 30, 4, 0, true }, { one, 60, 1, 0, false } }, 1,
      { { 60.0 * DAY, 5 } } },
    { "another container in this place before",
      { { other, 0, 9, 9, false }, { one, 30, 1, 0, false }, { other, 40, 9, 9, false }, { one, 60, 2, 0, false } }, 1,
      { { 30.0 * DAY, 2 } } },
    { "a single one", { { one, 0, 5, 0, false } }, 0, { { 0, 0 } } },
};

static void tells_intervals(void **state)
{
    const struct interval_case *c = *state;
    struct firn_history *history = open_history(scratch_path("a.firn"));
    struct firn_trend_interval got[FIRN_HISTORY_MAX];

    for (size_t i = 0; i < COUNT(c->told) && c->told[i].id != NULL; i++) {
        struct firn_history_entry made = entry(c->told[i].id, c->told[i].day, c->told[i].places, c->told[i].left);

        made.done = !c->told[i].broken_off;
        add(history, &made);
    }
    firn_history_close(history);
    history = open_history(scratch_path("a.firn"));
    assert_int_equal(firn_history_intervals(history, got), c->count);
    for (size_t i = 0; i < c->count; i++) {
        assert_true(got[i].seconds == c->wanted[i].seconds);
        assert_int_equal(got[i].places, c->wanted[i].places);
    }
    firn_history_close(history);
}

static void warns(void **state)
{
    struct firn_history *history = open_history(scratch_path("a.firn"));

    (void)state;
    for (int64_t month = 0; month < 5; month++)
        add(history, (struct firn_history_entry[]){ entry(one, 30 * month, month == 4 ? 9 : 0, 0) });
    assert_true(firn_history_trend(history).grows);
    assert_int_equal(firn_history_trend(history).newest_places, 9);
    add(history, (struct firn_history_entry[]){ entry(one, 150, 0, 0) });
    assert_false(firn_history_trend(history).grows);
    firn_history_close(history);
}

static int enter(void **state)
{
    (void)state;
    scratch_make();
    scratch_write("a.firn", "", 0, 0644);
    scratch_write("b.firn", "", 0, 0644);
    return mkdir(scratch_path("state"), 0755);
}

static int leave(void **state)
{
    (void)state;
    scratch_remove();
    return 0;
}

int main(void)
{
    struct CMUnitTest tests[32];
    size_t count = 0;
    static const struct CMUnitTest others[] = {
        cmocka_unit_test(slices_are_whole), cmocka_unit_test(counts_places), cmocka_unit_test(cores_come_back),
        cmocka_unit_test(keeps_what_it_is_told), cmocka_unit_test(joins_parts), cmocka_unit_test(counts_what_is_left),
        cmocka_unit_test(passes_over_nonsense),
        cmocka_unit_test(forgets_the_oldest), cmocka_unit_test(lives_without_a_folder),
        cmocka_unit_test(lives_without_memory), cmocka_unit_test(warns),
    };

    for (size_t i = 0; i < COUNT(others); i++)
        tests[count++] = others[i];
    for (size_t i = 0; i < COUNT(interval_cases); i++)
        tests[count++] = (struct CMUnitTest){ .name = interval_cases[i].what, .test_func = tells_intervals,
                                              .initial_state = (void *)(uintptr_t)&interval_cases[i] };
    for (size_t i = 0; i < count; i++) {
        tests[i].setup_func = enter;
        tests[i].teardown_func = leave;
    }
    return _cmocka_run_group_tests("history", tests, count, NULL, NULL);
}
