/* tests/transfer/test_pattern.c - which names a word chooses: by hand, from firn/pattern.h */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "firn/pattern.h"

#include "help/fault_memory.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>
#include <cmocka.h>

#include <locale.h>
#include <string.h>

static const struct pattern_case { const char *word, *name; bool chosen; } cases[] = {
    /* paths */
    { "a", "a", true },              { "a", "a/b", true },            { "a", "a/b/c", true },
    { "a", "ab", false },            { "a", "b/a", false },           { "a/b", "a", false },
    { "a/b", "a/b/c", true },        { "/a/b/", "a/b/c", true },      { "./a", "a", true },
    { "../a", "a", true },           { ".", "anything", true },       { "/", "anything", true },
    /* shell patterns without a slash: any single component */
    { "*.txt", "x.txt", true },      { "*.txt", "a/b/x.txt", true },  { "*.txt", "x.txt/inside", true },
    { "*.txt", "x.text", false },    { "*", ".hidden", true },        { "?", "a/bb", true },
    { "?", "aa/bb", false },         { "[ab]", "b", true },           { "[!ab]", "b", false },
    { "[[:digit:]]*", "9z", true },  { "a*c", "a/c", false },         { "?", "\xC3\xA9", true },
    { "???", "\xC3\xA9", false },     { "?", "\xE9", true },           { "*", "\xFF\xFE", true },
    /* shell patterns with a slash: the name or a folder above it, component by component */
    { "a/*", "a/b", true },          { "a/*", "a/b/c", true },        { "a/*", "a", false },
    { "*/b", "a/b", true },          { "*/b", "x/a/b", false },       { "*/b", "a/b/c", true },
    { "a/*/c", "a/b/c", true },      { "a/*/c", "a/b/b/c", false },   { "a/?/c", "a/b/c/d", true },
    { "a/[/]b", "a//b", false },
    /* characters that are special, in names that hold them */
    { "a[1]", "a[1]", true },        { "a[1]", "a1", true },          { "a\\*", "a*", true },
    { "a\\*", "ab", false },         { "[", "[", true },              { "*", "new\nline", true },
};

static void chooses(void **state)
{
    const struct pattern_case *c = *state;
    struct firn_pattern *pattern;

    assert_int_equal(firn_pattern_make(&c->word, 1, firn_memory_system(), &pattern), FIRN_OK);
    assert_int_equal(firn_pattern_match(pattern, c->name), c->chosen);
    assert_int_equal(firn_pattern_used(pattern, 0), c->chosen);
    firn_pattern_free(pattern);
}

static void remembers(void **state)
{
    static const char *const words[] = { "a", "*.txt", "never", "b" };
    struct firn_pattern *pattern;

    (void)state;
    assert_int_equal(firn_pattern_make(words, 4, firn_memory_system(), &pattern), FIRN_OK);
    assert_false(firn_pattern_used(pattern, 0));
    assert_true(firn_pattern_match(pattern, "a/x.txt"));      /* two at once */
    assert_false(firn_pattern_match(pattern, "nothing"));
    assert_true(firn_pattern_used(pattern, 0) && firn_pattern_used(pattern, 1));
    assert_false(firn_pattern_used(pattern, 2) || firn_pattern_used(pattern, 3) || firn_pattern_used(pattern, 4));
    firn_pattern_free(pattern);
    assert_int_equal(firn_pattern_make(NULL, 0, firn_memory_system(), &pattern), FIRN_OK);
    assert_false(firn_pattern_match(pattern, "a"));
    firn_pattern_free(pattern);
}

/* Letters are UTF-8 whatever the locale of the caller, which stays as it is. */
static void ignores_the_locale(void **state)
{
    static const char *const locales[] = { "C", "C.UTF-8" };

    (void)state;
    for (unsigned i = 0; i < 2; i++) {
        locale_t locale = newlocale(LC_ALL_MASK, locales[i], (locale_t)0);
        locale_t before = uselocale(locale);
        const char *word = "?";
        struct firn_pattern *pattern;

        assert_int_equal(firn_pattern_make(&word, 1, firn_memory_system(), &pattern), FIRN_OK);
        assert_true(firn_pattern_match(pattern, "\xC3\xA9"));
        assert_ptr_equal(uselocale(before), locale);
        firn_pattern_free(pattern);
        freelocale(locale);
    }
}

static void takes_any_length(void **state)
{
    static char long_name[100000], long_word[5000];
    const char *words[] = { "a", "*b" };
    const char *too_long = long_word;
    struct firn_pattern *pattern;

    (void)state;
    memset(long_name, 'x', sizeof long_name - 1);
    memcpy(long_name, "a/", 2);
    long_name[sizeof long_name - 2] = 'b';
    assert_int_equal(firn_pattern_make(words, 2, firn_memory_system(), &pattern), FIRN_OK);
    assert_true(firn_pattern_match(pattern, long_name));      /* by the path; no stored name is that long */
    assert_false(firn_pattern_match(pattern, long_name + 2));
    firn_pattern_free(pattern);
    memset(long_word, 'x', sizeof long_word - 1);
    assert_int_equal(firn_pattern_make(&too_long, 1, firn_memory_system(), &pattern), FIRN_BAD_ARGUMENT);
    assert_null(pattern);
}

static void lives_without_memory(void **state)
{
    static const char *const words[] = { "a", "b", "c*" };
    enum firn_status status = FIRN_NO_MEMORY;

    (void)state;
    for (unsigned n = 1; status != FIRN_OK; n++) {
        struct fault_memory fault;
        struct firn_pattern *pattern;

        fault_memory_make(&fault, n);
        status = firn_pattern_make(words, 3, &fault.memory, &pattern);
        assert_true(status == FIRN_OK || status == FIRN_NO_MEMORY);
        firn_pattern_free(pattern);
        assert_int_equal(fault.outstanding, 0);
    }
}

#define COUNT(array) (sizeof(array) / sizeof(array)[0])

int main(void)
{
    struct CMUnitTest tests[64];
    size_t count = 0;
    static const struct CMUnitTest others[] = {
        cmocka_unit_test(remembers), cmocka_unit_test(ignores_the_locale), cmocka_unit_test(takes_any_length),
        cmocka_unit_test(lives_without_memory),
    };

    for (size_t i = 0; i < COUNT(cases); i++)
        tests[count++] = (struct CMUnitTest){ .name = cases[i].word, .test_func = chooses,
                                              .initial_state = (void *)(uintptr_t)&cases[i] };
    for (size_t i = 0; i < COUNT(others); i++)
        tests[count++] = others[i];
    return _cmocka_run_group_tests("pattern", tests, count, NULL, NULL);
}
