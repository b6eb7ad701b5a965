/* tests/transfer/test_expect.c - manifests as RFC 8493 and GNU coreutils write them, and as nobody should */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "firn/expect.h"

#include "base/text.h"
#include "help/fault_memory.h"
#include "help/scratch.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <cmocka.h>

#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <unistd.h>

/* SHA-256 of "" and of "abc": FIPS 180-2 (2002), appendix B, and RFC 6234, section 8.5 */
#define EMPTY "e3b0c44298fc1c149afbf4c8996fb92427ae41e4649b934ca495991b7852b855"
#define ABC "ba7816bf8f01cfea414140de5dae2223b00361a396177a9cb410ff61f20015ad"

/* SHA-512 of "abc": FIPS 180-2, appendix C.1; MD5: RFC 1321, appendix A.5 */
#define ABC512 "ddaf35a193617abacc417349ae20413112e6fa4e89a97ea20a9eeee64b55d39a" \
               "2192992a274fc1a836ba3c23a3feebbd454d4423643ce80e2a9ac94fa54ca49f"
#define ABCMD5 "900150983cd24fb0d6963f7d28e17f72"

static const uint8_t abc[32] = {
    0xba, 0x78, 0x16, 0xbf, 0x8f, 0x01, 0xcf, 0xea, 0x41, 0x41, 0x40, 0xde, 0x5d, 0xae, 0x22, 0x23,
    0xb0, 0x03, 0x61, 0xa3, 0x96, 0x17, 0x7a, 0x9c, 0xb4, 0x10, 0xff, 0x61, 0xf2, 0x00, 0x15, 0xad,
};

static enum firn_status load(const char *text, size_t count, const struct firn_memory *memory, struct firn_fault *fault,
                             struct firn_expect **expect)
{
    scratch_write("manifest", text, count, 0644);
    return firn_expect_open(scratch_path("manifest"), memory, fault, expect);
}

/* A manifest of one line, and an item that it lists, or does not. */
static const struct line_case {
    const char *what, *text, *name;
    size_t operand_bytes;
    enum firn_expect_verdict verdict;
} line_cases[] = {
    { "RFC 8493: one space", ABC " data/x\n", "data/x", 0, FIRN_EXPECT_MATCH },
    { "RFC 8493: tabs and spaces", ABC " \t data/x\n", "data/x", 0, FIRN_EXPECT_MATCH },
    { "upper case", "BA7816BF8F01CFEA414140DE5DAE2223B00361A396177A9CB410FF61F20015AD  data/x\n", "data/x", 0,
      FIRN_EXPECT_MATCH },
    { "CR", ABC "  data/x\r", "data/x", 0, FIRN_EXPECT_MATCH },
    { "CRLF", ABC "  data/x\r\n", "data/x", 0, FIRN_EXPECT_MATCH },
    { "no end of line", ABC "  data/x", "data/x", 0, FIRN_EXPECT_MATCH },
    { "empty lines", "\n\n" ABC "  data/x\n\n", "data/x", 0, FIRN_EXPECT_MATCH },
    { "RFC 8493: %0A %0D %25", ABC "  data/a%0Ab%0Dc%25d\n", "data/a\nb\rc%d", 0, FIRN_EXPECT_MATCH },
    { "%25 is decoded once", ABC "  data/%250A\n", "data/%0A", 0, FIRN_EXPECT_MATCH },
    { "other percents stand", ABC "  data/%20%zz%\n", "data/%20%zz%", 0, FIRN_EXPECT_MATCH },
    { "as it stands", ABC "  data/100%25\n", "data/100%25", 0, FIRN_EXPECT_MATCH },
    { "blanks in a path", ABC "  data/a b  c \n", "data/a b  c ", 0, FIRN_EXPECT_MATCH },
    { "coreutils: binary mark", ABC " *data/x\n", "data/x", 0, FIRN_EXPECT_MATCH },
    { "a star that is a name's", ABC "  *x\n", "*x", 0, FIRN_EXPECT_MATCH },
    { "coreutils: escapes", "\\" ABC "  a\\nb\\\\c\\rd\n", "a\nb\\c\rd", 0, FIRN_EXPECT_MATCH },
    { "coreutils: backslash without escapes", ABC "  a\\nb\n", "a\\nb", 0, FIRN_EXPECT_MATCH },
    { "no UTF-8", ABC "  data/\xE9\n", "data/\xE9", 0, FIRN_EXPECT_MATCH },
    { "./", ABC "  ./x\n", "x", 0, FIRN_EXPECT_MATCH },
    { "absolute", ABC "  /srv/in/x\n", "srv/in/x", 0, FIRN_EXPECT_MATCH },
    { "another digest", EMPTY "  data/x\n", "data/x", 0, FIRN_EXPECT_MISMATCH },
    { "another path", ABC "  data/y\n", "data/x", 0, FIRN_EXPECT_UNLISTED },
    { "below an operand: from inside it", ABC "  data/x\n", "srv/in/bag/data/x", 10, FIRN_EXPECT_MATCH },
    { "below an operand: from beside it", ABC "  bag/data/x\n", "srv/in/bag/data/x", 10, FIRN_EXPECT_MATCH },
    { "below an operand: in full", ABC "  srv/in/bag/data/x\n", "srv/in/bag/data/x", 10, FIRN_EXPECT_MATCH },
    { "below an operand: from in between", ABC "  in/bag/data/x\n", "srv/in/bag/data/x", 10, FIRN_EXPECT_UNLISTED },
    { "below an operand: from too deep", ABC "  x\n", "srv/in/bag/data/x", 10, FIRN_EXPECT_UNLISTED },
    { "an operand that is a file", ABC "  x\n", "srv/in/x", 8, FIRN_EXPECT_MATCH },
    { "part of a name", ABC "  ag/data/x\n", "srv/in/bag/data/x", 10, FIRN_EXPECT_UNLISTED },
    { "an empty manifest", "", "x", 0, FIRN_EXPECT_UNLISTED },
};

static void holds_against(void **state)
{
    const struct line_case *c = *state;
    struct firn_fault fault = { 0 };
    struct firn_expect *expect;
    uint64_t listed;

    assert_int_equal(load(c->text, strlen(c->text), firn_memory_system(), &fault, &expect), FIRN_OK);
    listed = firn_expect_count(expect);
    assert_int_equal(listed, c->text[0] != '\0');
    assert_int_equal(firn_expect_missing(expect, NULL, NULL), listed);
    assert_int_equal(firn_expect_see(expect, c->name, c->operand_bytes, abc, NULL), c->verdict);
    assert_int_equal(firn_expect_missing(expect, NULL, NULL), c->verdict == FIRN_EXPECT_UNLISTED ? listed : 0);
    firn_expect_free(expect);
}

/* Each digest is asked for only where a line has it, and each is held against its own. */
static void knows_other_digests(void **state)
{
    static const char text[] = ABC512 "  one\n" ABCMD5 "  two\n" ABC "  three\n" ABC512 "  link\n" ABCMD5 "  odd\n";
    struct firn_intake_digests digests = { .sha512 = { 0 } };
    struct firn_fault fault = { 0 };
    struct firn_expect *expect;

    (void)state;
    assert_int_equal(load(ABC "  one\n", strlen(ABC "  one\n"), firn_memory_system(), &fault, &expect), FIRN_OK);
    assert_int_equal(firn_expect_digests(expect), 0);
    firn_expect_free(expect);
    assert_int_equal(load(text, sizeof text - 1, firn_memory_system(), &fault, &expect), FIRN_OK);
    assert_int_equal(firn_expect_digests(expect), FIRN_INTAKE_SHA512 | FIRN_INTAKE_MD5);
    assert_int_equal(firn_expect_see(expect, "one", 0, abc, &digests), FIRN_EXPECT_MISMATCH);
    assert_int_equal(firn_expect_see(expect, "one", 0, abc, NULL), FIRN_EXPECT_MISMATCH);
    assert_int_equal(firn_text_parse_hex(ABC512, 64, digests.sha512), FIRN_OK);
    assert_int_equal(firn_expect_see(expect, "one", 0, abc, &digests), FIRN_EXPECT_MATCH);
    assert_int_equal(firn_expect_see(expect, "two", 0, abc, &digests), FIRN_EXPECT_MISMATCH);
    assert_int_equal(firn_text_parse_hex(ABCMD5, 16, digests.md5), FIRN_OK);
    assert_int_equal(firn_expect_see(expect, "two", 0, abc, &digests), FIRN_EXPECT_MATCH);
    assert_int_equal(firn_expect_see(expect, "three", 0, abc, &digests), FIRN_EXPECT_MATCH);
    assert_int_equal(firn_expect_see_link(expect, "link", 0, "one"), FIRN_EXPECT_MATCH);
    assert_int_equal(firn_expect_see_link(expect, "odd", 0, "one"), FIRN_EXPECT_UNLISTED);
    assert_int_equal(firn_expect_missing(expect, NULL, NULL), 1);
    firn_expect_free(expect);
}

static const struct bad_case { const char *what, *text; size_t count; uint64_t line; } bad_cases[] = {
    { "no digest", "x\n", 2, 1 },
    { "a digest of SHA-1", "a9993e364706816aba3e25717850c26c9cd0d89d  x\n", 44, 1 },
    { "a digest one digit short", "a7816bf8f01cfea414140de5dae2223b00361a396177a9cb410ff61f20015ad  x\n", 67, 1 },
    { "a digit that is none", "ga7816bf8f01cfea414140de5dae2223b00361a396177a9cb410ff61f20015a  x\n", 68, 1 },
    { "no path", ABC "\n", 65, 1 },
    { "blanks, no path", ABC "   \n", 68, 1 },
    { "a path that is nothing", ABC "  ..\n", 69, 1 },
    { "the second line", ABC "  x\nnonsense\n", 77, 2 },
    { "twice, differently", ABC "  x\n" EMPTY "  ./x\n", 138, 2 },
    { "a NUL", ABC "  x\0y\n", 70, 1 },
};

static void refuses(void **state)
{
    const struct bad_case *c = *state;
    struct firn_fault fault = { 0 };
    struct firn_expect *expect;

    assert_int_equal(load(c->text, c->count, firn_memory_system(), &fault, &expect), FIRN_BAD_DATA);
    assert_null(expect);
    assert_int_equal(fault.at, c->line);
    assert_true(fault.what[0] != '\0');
}

static void note_missing(void *self, const char *path)
{
    strcat(self, path);
    strcat(self, ";");
}

static void tells_missing(void **state)
{
    static const char text[] = EMPTY "  one\n" ABC "  two\n" EMPTY "  three\n" ABC "  two\n";
    char missing[100] = "";
    struct firn_fault fault;
    struct firn_expect *expect;

    (void)state;
    assert_int_equal(load(text, sizeof text - 1, firn_memory_system(), &fault, &expect), FIRN_OK);
    assert_int_equal(firn_expect_count(expect), 3);
    assert_int_equal(firn_expect_see(expect, "two", 0, abc, NULL), FIRN_EXPECT_MATCH);
    assert_int_equal(firn_expect_missing(expect, note_missing, missing), 2);
    assert_string_equal(missing, "one;three;");
    firn_expect_free(expect);
}

static void follows_links(void **state)
{
    static const char text[] = ABC "  one\n" ABC "  link\n" EMPTY "  wrong link\n" ABC "  link to nothing\n";
    struct firn_fault fault;
    struct firn_expect *expect;

    (void)state;
    assert_int_equal(load(text, sizeof text - 1, firn_memory_system(), &fault, &expect), FIRN_OK);
    assert_int_equal(firn_expect_see_link(expect, "link", 0, "one"), FIRN_EXPECT_UNLISTED);      /* not seen yet */
    assert_int_equal(firn_expect_see(expect, "one", 0, abc, NULL), FIRN_EXPECT_MATCH);
    assert_int_equal(firn_expect_see_link(expect, "link", 0, "one"), FIRN_EXPECT_MATCH);
    assert_int_equal(firn_expect_see_link(expect, "wrong link", 0, "one"), FIRN_EXPECT_MISMATCH);
    assert_int_equal(firn_expect_see_link(expect, "link to nothing", 0, "unlisted"), FIRN_EXPECT_UNLISTED);
    assert_int_equal(firn_expect_missing(expect, NULL, NULL), 1);
    firn_expect_free(expect);
}

/* Names that coreutils itself wrote. */
static void reads_sha256sum(void **state)
{
    static const char *const names[] = { "plain",  "two words", "new\nline", "back\\slash",
                                         "100%25", "\xE9",      "*star",     "\rcr" };
    struct firn_fault fault;
    struct firn_expect *expect;

    (void)state;
    for (size_t i = 0; i < sizeof names / sizeof names[0]; i++)
        scratch_write(names[i], "abc", 3, 0644);
    assert_int_equal(chdir(scratch_path("")), 0);
    assert_int_equal(system("LC_ALL=C sha256sum -- plain 'two words' \"$(printf 'new\\nline')\" 'back\\slash' '100%25' "
                            "\"$(printf '\\351')\" '*star' \"$(printf '\\rcr')\" > sums"), 0);
    assert_int_equal(firn_expect_open("sums", firn_memory_system(), &fault, &expect), FIRN_OK);
    assert_int_equal(firn_expect_count(expect), sizeof names / sizeof names[0]);
    for (size_t i = 0; i < sizeof names / sizeof names[0]; i++)
        assert_int_equal(firn_expect_see(expect, names[i], 0, abc, NULL), FIRN_EXPECT_MATCH);
    assert_int_equal(firn_expect_missing(expect, NULL, NULL), 0);
    firn_expect_free(expect);
}

static void says_when_it_cannot(void **state)
{
    struct firn_fault fault = { 0 };
    struct firn_expect *expect;

    (void)state;
    assert_int_equal(firn_expect_open(scratch_path("not there"), firn_memory_system(), &fault, &expect), FIRN_NO_INPUT);
    assert_int_equal(firn_expect_open(scratch_path(""), firn_memory_system(), &fault, &expect), FIRN_IO);
    assert_null(expect);
}

static void lives_without_memory(void **state)
{
    static const char text[] = ABC "  100%25\n" ABC "  two\n";
    enum firn_status status = FIRN_NO_MEMORY;

    (void)state;
    for (unsigned n = 1; status != FIRN_OK; n++) {
        struct fault_memory memory;
        struct firn_fault fault;
        struct firn_expect *expect;

        fault_memory_make(&memory, n);
        status = load(text, sizeof text - 1, &memory.memory, &fault, &expect);
        assert_true(status == FIRN_OK || status == FIRN_NO_MEMORY);
        firn_expect_free(expect);
        assert_int_equal(memory.outstanding, 0);
    }
}

static int set_up(void **state)
{
    (void)state;
    scratch_make();
    return 0;
}

static int tear_down(void **state)
{
    (void)state;
    scratch_remove();
    return 0;
}

#define COUNT(array) (sizeof(array) / sizeof(array)[0])

int main(void)
{
    struct CMUnitTest tests[64];
    size_t count = 0;
    static const struct CMUnitTest others[] = {
        cmocka_unit_test(knows_other_digests), cmocka_unit_test(tells_missing), cmocka_unit_test(follows_links),
        cmocka_unit_test(reads_sha256sum),
        cmocka_unit_test(says_when_it_cannot), cmocka_unit_test(lives_without_memory),
    };

    for (size_t i = 0; i < COUNT(line_cases); i++)
        tests[count++] = (struct CMUnitTest){ .name = line_cases[i].what, .test_func = holds_against,
                                              .initial_state = (void *)(uintptr_t)&line_cases[i] };
    for (size_t i = 0; i < COUNT(bad_cases); i++)
        tests[count++] = (struct CMUnitTest){ .name = bad_cases[i].what, .test_func = refuses,
                                              .initial_state = (void *)(uintptr_t)&bad_cases[i] };
    for (size_t i = 0; i < COUNT(others); i++)
        tests[count++] = others[i];
    return _cmocka_run_group_tests("expect", tests, count, set_up, tear_down);
}
