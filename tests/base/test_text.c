/* tests/base/test_text.c - numbers and names as people read and write them */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "base/text.h"

#include "base/bytes.h"
#include "base/fault.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <cmocka.h>

#include <string.h>

/* IEC 80000-13: KiB = 1024, MiB = 1024^2 ...; SI: kB = 1000, MB = 1000^2 ... */
static const struct { const char *words; enum firn_status status; uint64_t bytes;
} sizes[] = {
    { "0", FIRN_OK, 0 },
    { "512", FIRN_OK, 512 },
    { "512B", FIRN_OK, 512 },
    { "4KiB", FIRN_OK, 4096 },
    { "128MiB", FIRN_OK, 134217728 },
    { "25GB", FIRN_OK, UINT64_C(25000000000) },
    { "1.5 TB", FIRN_OK, UINT64_C(1500000000000) },
    { "0.5KiB", FIRN_OK, 512 },
    { "1kB", FIRN_OK, 1000 },
    { "2PiB", FIRN_OK, UINT64_C(2251799813685248) },
    { "", FIRN_BAD_ARGUMENT, 0 },
    { "MiB", FIRN_BAD_ARGUMENT, 0 },
    { "-1", FIRN_BAD_ARGUMENT, 0 },
    { "1mb", FIRN_BAD_ARGUMENT, 0 },
    { "1MiBs", FIRN_BAD_ARGUMENT, 0 },
    { "99999999999999999999", FIRN_BAD_ARGUMENT, 0 },
    { "20000PiB", FIRN_BAD_ARGUMENT, 0 },
};

static void parses_sizes(void **state)
{
    for (size_t i = 0; i < sizeof sizes / sizeof sizes[0]; i++) {
        uint64_t bytes = 0;

        assert_int_equal(firn_text_parse_size(sizes[i].words, &bytes), sizes[i].status);
        assert_true(bytes == sizes[i].bytes);
    }
    (void)state;
}

static const struct { uint64_t bytes; const char *words; } shown[] = {
    { 0, "0 B" }, { 1023, "1023 B" }, { 1024, "1.00 KiB" }, { 1536, "1.50 KiB" }, { 10239, "10.0 KiB" },
    { 134217728, "128 MiB" }, { 1048575, "1.00 MiB" }, { UINT64_MAX, "16.0 EiB" },
};

static void shows_sizes(void **state)
{
    char buffer[FIRN_TEXT_SIZE_ROOM];

    for (size_t i = 0; i < sizeof shown / sizeof shown[0]; i++)
        assert_string_equal(firn_text_size(shown[i].bytes, buffer), shown[i].words);
    (void)state;
}

static void groups_counts(void **state)
{
    char buffer[FIRN_TEXT_COUNT_ROOM];

    assert_string_equal(firn_text_count(0, buffer), "0");
    assert_string_equal(firn_text_count(999, buffer), "999");
    assert_string_equal(firn_text_count(1234567, buffer), "1 234 567");
    assert_string_equal(firn_text_count(UINT64_MAX, buffer), "18 446 744 073 709 551 615");
    (void)state;
}

static void counts_are_whole_numbers(void **state)
{
    uint64_t count = 7;

    assert_int_equal(firn_text_parse_count("18446744073709551615", &count), FIRN_OK);
    assert_true(count == UINT64_MAX);
    assert_int_equal(firn_text_parse_count("18446744073709551616", &count), FIRN_BAD_ARGUMENT);
    assert_int_equal(firn_text_parse_count("", &count), FIRN_BAD_ARGUMENT);
    assert_int_equal(firn_text_parse_count("+1", &count), FIRN_BAD_ARGUMENT);
    assert_int_equal(firn_text_parse_count("1 ", &count), FIRN_BAD_ARGUMENT);
    (void)state;
}

static void durations_have_units(void **state)
{
    static const struct { const char *words; enum firn_status status; uint64_t seconds; } durations[] = {
        { "45s", FIRN_OK, 45 }, { "90min", FIRN_OK, 5400 }, { "2h", FIRN_OK, 7200 }, { "30 d", FIRN_OK, 2592000 },
        { "2w", FIRN_OK, 1209600 }, { "0s", FIRN_OK, 0 }, { "4294967295w", FIRN_OK, UINT64_C(2597596220016000) },
        { "2", FIRN_BAD_ARGUMENT, 0 }, { "h", FIRN_BAD_ARGUMENT, 0 }, { "", FIRN_BAD_ARGUMENT, 0 },
        { "-2h", FIRN_BAD_ARGUMENT, 0 }, { "1.5h", FIRN_BAD_ARGUMENT, 0 }, { "2h ", FIRN_BAD_ARGUMENT, 0 },
        { "2H", FIRN_BAD_ARGUMENT, 0 }, { "99999999999999999999s", FIRN_BAD_ARGUMENT, 0 },
    };

    (void)state;
    for (size_t i = 0; i < sizeof durations / sizeof durations[0]; i++) {
        uint64_t seconds = 0;

        assert_int_equal(firn_text_parse_duration(durations[i].words, &seconds), durations[i].status);
        assert_true(seconds == durations[i].seconds);
    }
}

/* RFC 3629, section 3 and 4: shortest form only, no surrogates, nothing above U+10FFFF */
static const struct { const char *bytes; size_t length;
} characters[] = {
    { "A", 1 },
    { "\xC3\xA9", 2 },
    { "\xE2\x82\xAC", 3 },
    { "\xF0\x9F\x8D\x80", 4 },
    { "\x80", 0 },
    { "\xC0\x80", 0 },
    { "\xC1\xBF", 0 },
    { "\xE0\x9F\xBF", 0 },
    { "\xED\xA0\x80", 0 },
    { "\xF0\x8F\xBF\xBF", 0 },
    { "\xF4\x90\x80\x80", 0 },
    { "\xC3", 0 },
    { "\xE2\x82", 0 },
    { "\xFF", 0 },
};

static void knows_utf8(void **state)
{
    for (size_t i = 0; i < sizeof characters / sizeof characters[0]; i++)
        assert_int_equal(firn_text_utf8(characters[i].bytes, strlen(characters[i].bytes)), characters[i].length);
    assert_int_equal(firn_text_utf8("", 0), 0);
    (void)state;
}

static const struct { const char *name, *shown, *json; } names[] = {
    { "quay/ledger", "quay/ledger", "\"quay/ledger\"" },
    { "a\nb\tc\\", "a\\nb\\tc\\\\", "\"a\\u000ab\\u0009c\\\\\"" },
    { "\x1b[2J", "\\x1B[2J", "\"\\u001b[2J\"" },
    { "caf\xC3\xA9", "caf\xC3\xA9", "\"caf\xC3\xA9\"" },
    { "caf\xE9", "caf\\xE9", "\"caf\\ufffd\"" },
    { "\"q\"", "\"q\"", "\"\\\"q\\\"\"" },
    /* Unicode 15.0, PropList.txt, Bidi_Control: 061C, 200E..200F, 202A..202E, 2066..2069; from memory */
    { "\xE2\x80\xAE" "fdp.exe", "\\xE2\\x80\\xAE" "fdp.exe", "\"\xE2\x80\xAE" "fdp.exe\"" },
    { "\xE2\x80\xA7\xE2\x80\xA8\xE2\x80\xAF", "\xE2\x80\xA7\\xE2\\x80\\xA8\xE2\x80\xAF",
      "\"\xE2\x80\xA7\xE2\x80\xA8\xE2\x80\xAF\"" },
    { "\xE2\x81\xA5\xE2\x81\xA6\xE2\x81\xA9", "\xE2\x81\xA5\\xE2\\x81\\xA6\\xE2\\x81\\xA9",
      "\"\xE2\x81\xA5\xE2\x81\xA6\xE2\x81\xA9\"" },
    { "\xD8\x9C\xD8\x9B", "\\xD8\\x9C\xD8\x9B", "\"\xD8\x9C\xD8\x9B\"" },
    { "\xF0\x9F\x8C\x80", "\xF0\x9F\x8C\x80", "\"\xF0\x9F\x8C\x80\"" },
    { "\xC2\x85", "\\xC2\\x85", "\"\xC2\x85\"" },
};

static void shows_names_safely(void **state)
{
    for (size_t i = 0; i < sizeof names / sizeof names[0]; i++) {
        char buffer[100];
        struct firn_text text;

        firn_text_start(&text, buffer, sizeof buffer);
        firn_text_add_name(&text, names[i].name);
        assert_string_equal(buffer, names[i].shown);
        firn_text_start(&text, buffer, sizeof buffer);
        assert_int_equal(firn_text_add_json(&text, names[i].name), strstr(names[i].json, "ufffd") == NULL);
        assert_string_equal(buffer, names[i].json);
        assert_false(text.cut);
    }
    (void)state;
}

static void never_leaves_its_buffer(void **state)
{
    char buffer[12] = "###########";
    struct firn_text text;

    firn_text_start(&text, buffer, 8);
    firn_text_add(&text, "%s", "12345");
    firn_text_add_bytes(&text, "6789", 4);
    assert_true(text.cut);
    assert_string_equal(buffer, "1234567");
    assert_memory_equal(buffer + 8, "###", 3);
    firn_text_start(&text, buffer, 8);
    firn_text_add(&text, "%d", 123456789);
    assert_true(text.cut);
    assert_string_equal(buffer, "1234567");
    (void)state;
}

static void hexadecimal_both_ways(void **state)
{
    const uint8_t bytes[4] = { 0x00, 0x9F, 0xA0, 0xFF };
    uint8_t back[4];
    char buffer[16];
    struct firn_text text;

    firn_text_start(&text, buffer, sizeof buffer);
    firn_text_add_hex(&text, bytes, sizeof bytes);
    assert_string_equal(buffer, "009fa0ff");
    assert_int_equal(firn_text_parse_hex("009FA0ff", 4, back), FIRN_OK);
    assert_memory_equal(back, bytes, 4);
    assert_int_equal(firn_text_parse_hex("0g", 1, back), FIRN_BAD_ARGUMENT);
    assert_int_equal(firn_text_parse_hex("0", 1, back), FIRN_BAD_ARGUMENT);
    (void)state;
}

static void bytes_are_little_endian(void **state)
{
    const uint8_t bytes[8] = { 0x01, 0x23, 0x45, 0x67, 0x89, 0xAB, 0xCD, 0xEF };
    uint8_t back[8] = { 0 };

    assert_int_equal(firn_bytes_get16(bytes), 0x2301);
    assert_int_equal(firn_bytes_get32(bytes), 0x67452301);
    assert_true(firn_bytes_get64(bytes) == UINT64_C(0xEFCDAB8967452301));
    firn_bytes_put64(back, UINT64_C(0xEFCDAB8967452301));
    assert_memory_equal(back, bytes, 8);
    firn_bytes_put32(back, 0x67452301);
    firn_bytes_put16(back + 4, 0xAB89);
    assert_memory_equal(back, bytes, 6);
    (void)state;
}

static void every_status_has_its_phrase(void **state)
{
    for (int status = FIRN_OK; status <= FIRN_READ_ONLY; status++) {
        assert_string_not_equal(firn_status_text((enum firn_status)status), "unknown status");
        for (int other = FIRN_OK; other < status; other++)
            assert_string_not_equal(firn_status_text((enum firn_status)status),
                                    firn_status_text((enum firn_status)other));
    }
    (void)state;
}

static void faults_are_filled_in(void **state)
{
    struct firn_fault fault;

    assert_int_equal(firn_fault_tell(&fault, FIRN_IO, 5, 4096, "a\nb"), FIRN_IO);
    assert_int_equal(fault.os_error, 5);
    assert_true(fault.at == 4096);
    assert_string_equal(fault.what, "a\\nb");
    assert_int_equal(firn_fault_tell(NULL, FIRN_LOST, 0, 0, NULL), FIRN_LOST);
    (void)state;
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(parses_sizes), cmocka_unit_test(shows_sizes), cmocka_unit_test(groups_counts),
        cmocka_unit_test(counts_are_whole_numbers),
        cmocka_unit_test(durations_have_units), cmocka_unit_test(knows_utf8), cmocka_unit_test(shows_names_safely),
        cmocka_unit_test(never_leaves_its_buffer), cmocka_unit_test(hexadecimal_both_ways),
        cmocka_unit_test(bytes_are_little_endian), cmocka_unit_test(every_status_has_its_phrase),
        cmocka_unit_test(faults_are_filled_in),
    };

    return cmocka_run_group_tests_name("text", tests, NULL, NULL);
}
