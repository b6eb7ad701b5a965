/* tests/transfer/test_names.c - stored names, the set of names, extents of files */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "transfer/holes.h"
#include "transfer/names.h"
#include "transfer/stored_name.h"

#include "help/fault_memory.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <cmocka.h>

#include <stdio.h>
#include <string.h>

/* By hand, from the rule in firn/intake.h. */
static const struct name_case { const char *name, *stored; bool dots; } name_cases[] = {
    { "a", "a", false },             { "a/b", "a/b", false },         { "/a/b", "a/b", false },
    { "///a//b///", "a/b", false },  { "./a/./b/.", "a/b", false },   { "../a", "a", true },
    { "../../../a", "a", true },     { "/../a", "a", true },          { "a/..", "", true },
    { "a/../b", "b", true },         { "a/b/../../c", "c", true },    { "a/../../b", "b", true },
    { "..", "", true },              { ".", "", false },              { "/", "", false },
    { "", "", false },               { "...", "...", false },         { "..a", "..a", false },
    { "a/...", "a/...", false },     { ".hidden", ".hidden", false }, { "a..", "a..", false },
    { " ", " ", false },             { "a/..b/c", "a/..b/c", false },
};

static void makes_name(void **state)
{
    const struct name_case *c = *state;
    char stored[FIRN_STORED_NAME_ROOM];
    bool dots;

    assert_int_equal(firn_stored_name_make(c->name, stored, &dots), FIRN_OK);
    assert_string_equal(stored, c->stored);
    assert_int_equal(dots, c->dots);
    if (c->stored[0] != '\0')
        assert_true(firn_stored_name_safe(stored));
}

static const struct safe_case { const char *name; bool safe; } safe_cases[] = {
    { "a", true },      { "a/b", true },    { "...", true },     { "a/..b", true },  { "", false },
    { "/", false },     { "/a", false },    { "a/", false },     { "a//b", false },  { ".", false },
    { "..", false },    { "../a", false },  { "a/..", false },   { "a/../b", false }, { "a/.", false },
    { "a/./b", false }, { "./a", false },
};

static void judges_name(void **state)
{
    const struct safe_case *c = *state;

    assert_int_equal(firn_stored_name_safe(c->name), c->safe);
}

static void knows_the_longest(void **state)
{
    char name[5000], stored[FIRN_STORED_NAME_ROOM];

    (void)state;
    memset(name, 'x', sizeof name);
    name[4095] = '\0';
    assert_int_equal(firn_stored_name_make(name, stored, NULL), FIRN_OK);
    assert_true(firn_stored_name_safe(name));
    name[4095] = 'x';
    name[4096] = '\0';
    assert_int_equal(firn_stored_name_make(name, stored, NULL), FIRN_OVER_LIMIT);
    assert_false(firn_stored_name_safe(name));
    name[2000] = '/';
    name[4095] = '\0';
    assert_int_equal(firn_stored_name_make(name, stored, NULL), FIRN_OK);
    assert_int_equal(strlen(stored), 4095);
    name[4095] = 'x';
    assert_int_equal(firn_stored_name_make(name, stored, NULL), FIRN_OVER_LIMIT);
}

static void lies_within(void **state)
{
    (void)state;
    assert_true(firn_stored_name_within("a/b", "a", 1));
    assert_true(firn_stored_name_within("a", "a", 1));
    assert_true(firn_stored_name_within("anything", "", 0));
    assert_false(firn_stored_name_within("ab", "a", 1));
    assert_false(firn_stored_name_within("a", "a/b", 3));
}

enum { MANY = 100000 };

static void keeps_many(void **state)
{
    struct firn_names *names;
    char key[32];
    bool fresh;
    void *record;

    (void)state;
    assert_int_equal(firn_names_make(firn_memory_system(), sizeof(int), &names), FIRN_OK);
    for (int i = 0; i < MANY; i++) {
        (void)snprintf(key, sizeof key, "name %d", i);
        assert_int_equal(firn_names_add(names, key, strlen(key), &record, &fresh), FIRN_OK);
        assert_true(fresh && *(int *)record == 0);
        *(int *)record = i + 1;
    }
    for (int i = 0; i < MANY; i++) {
        const char *same;

        (void)snprintf(key, sizeof key, "name %d", i);
        record = firn_names_find(names, key, strlen(key));
        assert_non_null(record);
        assert_int_equal(*(int *)record, i + 1);
        assert_ptr_equal(firn_names_at(names, (size_t)i, &same), record);
        assert_string_equal(same, key);
        assert_null(firn_names_find(names, key, strlen(key) + 1));
    }
    assert_int_equal(firn_names_add(names, "", 0, &record, &fresh), FIRN_OK);
    assert_true(fresh);
    assert_int_equal(firn_names_add(names, "", 0, &record, &fresh), FIRN_OK);
    assert_false(fresh);
    assert_int_equal(firn_names_count(names), MANY + 1);
    firn_names_free(names);
}

static void lives_without_memory(void **state)
{
    bool done = false;

    (void)state;
    for (unsigned n = 1; !done; n++) {
        struct fault_memory fault;
        struct firn_names *names = NULL;
        enum firn_status status;
        void *record;

        fault_memory_make(&fault, n);
        status = firn_names_make(&fault.memory, 8, &names);
        for (int i = 0; i < 200 && status == FIRN_OK; i++)
            status = firn_names_add(names, &i, sizeof i, &record, NULL);
        if (status == FIRN_OK && firn_names_keep(names, "word", 4) == NULL)
            status = FIRN_NO_MEMORY;
        done = status == FIRN_OK;
        assert_true(done || status == FIRN_NO_MEMORY);
        firn_names_free(names);
        assert_int_equal(fault.outstanding, 0);
    }
}

/* Extents as they come; what is stored must cover them, stay within bounds, and not depend on how they were cut. */
static void bounds_extents(void **state)
{
    struct firn_holes whole, cut;
    const uint64_t count = 3 * (uint64_t)FIRN_ITEM_EXTENTS_MAX;

    (void)state;
    firn_holes_start(&whole, firn_memory_system());
    firn_holes_start(&cut, firn_memory_system());
    for (uint64_t i = 0; i < count; i++) {
        uint64_t at = i * 16384 + (i % 7) * 512;      /* holes of different lengths */

        assert_int_equal(firn_holes_add(&whole, at, 4096), FIRN_OK);
        assert_int_equal(firn_holes_add(&cut, at, 100), FIRN_OK);
        assert_int_equal(firn_holes_add(&cut, at + 100, 3996), FIRN_OK);
    }
    assert_true(whole.count > 0 && whole.count <= FIRN_ITEM_EXTENTS_MAX);
    assert_int_equal(whole.count, cut.count);
    assert_memory_equal(whole.extents, cut.extents, whole.count * sizeof *whole.extents);
    for (size_t i = 0, extent = 0; i < count; i++) {
        uint64_t at = i * 16384 + (i % 7) * 512;

        while (whole.extents[extent].at + whole.extents[extent].bytes <= at)
            extent++;
        assert_true(whole.extents[extent].at <= at);
        assert_true(whole.extents[extent].at + whole.extents[extent].bytes >= at + 4096);
    }
    for (size_t i = 1; i < whole.count; i++)
        assert_true(whole.extents[i - 1].at + whole.extents[i - 1].bytes < whole.extents[i].at);
    firn_holes_end(&whole);
    firn_holes_end(&cut);
}

#define COUNT(array) (sizeof(array) / sizeof(array)[0])

int main(void)
{
    struct CMUnitTest tests[64];
    size_t count = 0;
    static const struct CMUnitTest others[] = {
        cmocka_unit_test(knows_the_longest), cmocka_unit_test(lies_within), cmocka_unit_test(keeps_many),
        cmocka_unit_test(lives_without_memory), cmocka_unit_test(bounds_extents),
    };

    for (size_t i = 0; i < COUNT(name_cases); i++)
        tests[count++] = (struct CMUnitTest){ .name = name_cases[i].name, .test_func = makes_name,
                                              .initial_state = (void *)(uintptr_t)&name_cases[i] };
    for (size_t i = 0; i < COUNT(safe_cases); i++)
        tests[count++] = (struct CMUnitTest){ .name = safe_cases[i].name, .test_func = judges_name,
                                              .initial_state = (void *)(uintptr_t)&safe_cases[i] };
    for (size_t i = 0; i < COUNT(others); i++)
        tests[count++] = others[i];
    return _cmocka_run_group_tests("names", tests, count, NULL, NULL);
}
