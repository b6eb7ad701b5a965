/*
 * tests/transfer/test_manifest.c - digests of what a container holds, and a folder held against it
 *
 * SHA-256 and SHA-512 of "abc": FIPS 180-2 (2002), appendices B.1 and C.1; MD5 of "abc": RFC 1321, appendix A.5; those
 * of "abd": sha256sum, sha512sum and md5sum of GNU coreutils 9.1. The large file is digested again by libcrypto here.
 * SPDX-License-Identifier: BSD-2-Clause
 */
#include "firn/manifest.h"

#include "help/fault_memory.h"
#include "help/scratch.h"
#include "transfer/box.h"
#include "transfer/tree.h"

#include <openssl/evp.h>
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

#define SHA256_ABC "ba7816bf8f01cfea414140de5dae2223b00361a396177a9cb410ff61f20015ad"
#define SHA512_ABC "ddaf35a193617abacc417349ae20413112e6fa4e89a97ea20a9eeee64b55d39a" \
                   "2192992a274fc1a836ba3c23a3feebbd454d4423643ce80e2a9ac94fa54ca49f"
#define MD5_ABC "900150983cd24fb0d6963f7d28e17f72"
#define SHA256_ABD "a52d159f262b2c6ddb724a61840befc36eb30c88877a4030b65cbe86298449c9"
#define SHA512_ABD "1a9840c27a5cf22dab060cdd8a83da2b0fbcb1aeb52d4f9d3894b639083e205a" \
                   "5ab3f6afaeeb21b8e99b5e0fe93daafaabeef274da5d6eadcc9db36e5b6f64c4"
#define MD5_ABD "4911e516e5aa21d327512e0c8b197616"

enum { NOTES_ROOM = 1 << 14, LARGE_BYTES = 20 << 20 };

/* What was told, line by line. */
struct notes { char words[NOTES_ROOM]; };

static void note(struct notes *notes, const char *format, ...)
{
    size_t used = strlen(notes->words);
    va_list arguments;

    va_start(arguments, format);
    assert_true(vsnprintf(notes->words + used, NOTES_ROOM - used, format, arguments) < (int)(NOTES_ROOM - used));
    va_end(arguments);
}

static void note_file(void *self, const struct firn_manifest_file *file)
{
    struct notes *notes = self;

    for (size_t i = 0; file->digest != NULL && i < file->digest_bytes; i++)
        note(notes, "%02x", file->digest[i]);
    note(notes, "%s  %s\n", file->digest == NULL ? "untold" : "", file->escaped);
}

static void note_finding(void *self, const struct firn_manifest_finding *finding)
{
    static const char *const kinds[] = { "missing", "extra", "changed", "unreadable", "untold" };

    note(self, "%s %s%s%s\n", kinds[finding->kind], finding->path, finding->detail[0] == '\0' ? "" : ": ",
         finding->detail);
}

static struct firn_manifest_report list(struct box *box, enum firn_manifest_algorithm algorithm, const char *below,
                                        struct notes *notes)
{
    const struct firn_manifest_options options = {
        .memory = box->memory, .algorithm = algorithm, .choice.below = below, .self = notes, .file = note_file
    };
    struct firn_manifest_report report;

    notes->words[0] = '\0';
    assert_int_equal(firn_manifest_list(box->reader, &options, &box->fault, &report), FIRN_OK);
    return report;
}

static struct firn_manifest_check_report check(struct box *box, const char *folder, const char *below,
                                               struct firn_pattern *patterns, struct notes *notes)
{
    const struct firn_manifest_check_options options = {
        .memory = box->memory, .folder = folder, .choice = { below, patterns }, .self = notes, .finding = note_finding
    };
    struct firn_manifest_check_report report;

    notes->words[0] = '\0';
    assert_int_equal(firn_manifest_check(box->reader, &options, &box->fault, &report), FIRN_OK);
    return report;
}

/* A folder "quay" in the scratch folder, packed; the working directory is the scratch folder. */
static struct box *pack_quay(const struct firn_memory *memory)
{
    struct box *box = box_make(memory);

    assert_int_equal(box_take_path(box, "quay"), FIRN_OK);
    assert_int_equal(box_close_lid(box), FIRN_OK);
    return box;
}

static void make_quay(void)
{
    tree_folder("quay", 0755);
    tree_folder("quay/maps", 0755);
    tree_file("quay/abc", "abc", 3, 0644);
    tree_file("quay/100%\nof\rit", "abc", 3, 0644);
    tree_file("quay/maps/abd", "abd", 3, 0644);
    assert_int_equal(link("quay/abc", "quay/maps/same"), 0);
    assert_int_equal(symlink("../abc", "quay/maps/link"), 0);
    assert_int_equal(mkfifo("quay/pipe", 0600), 0);
}

/* ---- listing ---- */

static const struct list_case {
    const char *what;
    enum firn_manifest_algorithm algorithm;
    const char *below, *words;
} list_cases[] = {
    { "SHA-256, a link under its own name, RFC 8493's %0A %0D %25", FIRN_MANIFEST_SHA256, "quay",
      SHA256_ABC "  100%25%0Aof%0Dit\n" SHA256_ABC "  abc\n"
      SHA256_ABD "  maps/abd\n" SHA256_ABC "  maps/same\n" },
    { "SHA-512", FIRN_MANIFEST_SHA512, "./quay//maps/..",
      SHA512_ABC "  100%25%0Aof%0Dit\n" SHA512_ABC "  abc\n"
      SHA512_ABD "  maps/abd\n" SHA512_ABC "  maps/same\n" },
    { "MD5", FIRN_MANIFEST_MD5, "quay", MD5_ABC "  100%25%0Aof%0Dit\n" MD5_ABC "  abc\n"
      MD5_ABD "  maps/abd\n" MD5_ABC "  maps/same\n" },
    { "names in full", FIRN_MANIFEST_SHA256, NULL,
      SHA256_ABC "  quay/100%25%0Aof%0Dit\n" SHA256_ABC "  quay/abc\n"
      SHA256_ABD "  quay/maps/abd\n"
      SHA256_ABC "  quay/maps/same\n" },
    { "a link whose file is not among them", FIRN_MANIFEST_MD5, "quay/maps",
      MD5_ABD "  abd\n" MD5_ABC "  same\n" },
    { "nothing is called so", FIRN_MANIFEST_MD5, "qua", "" },
};

static void lists(void **state)
{
    const struct list_case *c = *state;
    struct notes notes;
    struct box *box;
    struct firn_manifest_report report;

    make_quay();
    box = pack_quay(NULL);
    report = list(box, c->algorithm, c->below, &notes);
    assert_string_equal(notes.words, c->words);
    assert_int_equal(report.untold, 0);
    assert_int_equal(report.items_unknown, 0);
    box_free(box);
}

/* A file whose digest stands in a later part of the catalogue than its name, with a hole and something behind it. */
static void large_file(void)
{
    FILE *file;

    tree_folder("quay", 0755);
    tree_pattern("quay/large", LARGE_BYTES, 1931);
    tree_file("quay/small", "abc", 3, 0644);
    file = fopen("quay/large", "r+");
    assert_non_null(file);
    assert_int_equal(ftruncate(fileno(file), 2 * LARGE_BYTES), 0);
    assert_int_equal(fclose(file), 0);
}

static void add_line(char *words, const EVP_MD *method, const char *path)
{
    size_t count, room = 300;
    uint8_t *bytes = scratch_read(path, &count), digest[EVP_MAX_MD_SIZE];
    unsigned digest_bytes;
    char *end = words + strlen(words);

    assert_non_null(bytes);
    assert_int_equal(EVP_Digest(bytes, count, digest, &digest_bytes, method, NULL), 1);
    for (unsigned i = 0; i < digest_bytes; i++, end += 2, room -= 2)
        (void)snprintf(end, room, "%02x", digest[i]);
    (void)snprintf(end, room, "  %s\n", path);
    free(bytes);
}

static void lists_large_files(void **state)
{
    static const enum firn_manifest_algorithm algorithms[] = {
        FIRN_MANIFEST_SHA256, FIRN_MANIFEST_SHA512, FIRN_MANIFEST_MD5
    };
    const EVP_MD *methods[] = { EVP_sha256(), EVP_sha512(), EVP_md5() };
    struct box *box;

    (void)state;
    large_file();
    box = pack_quay(NULL);
    for (size_t i = 0; i < COUNT(algorithms); i++) {
        char wanted[1000] = "";
        struct notes notes;

        add_line(wanted, methods[i], "quay/large");
        add_line(wanted, methods[i], "quay/small");
        assert_int_equal(list(box, algorithms[i], NULL, &notes).bytes, 2 * LARGE_BYTES + 3);
        assert_string_equal(notes.words, wanted);
    }
    box_free(box);
}

/* What is lost gets no digest made from what is left. */
static void never_digests_what_is_left(void **state)
{
    struct firn_manifest_report report;
    struct notes notes;
    struct box *box;

    (void)state;
    large_file();
    box = pack_quay(NULL);
    box_wipe(box, 1000, 1);
    assert_int_equal(box_open_again(box), FIRN_OK);
    report = list(box, FIRN_MANIFEST_MD5, "quay", &notes);
    assert_string_equal(notes.words, "untold  large\n" MD5_ABC "  small\n");
    assert_int_equal(report.untold, 1);
    box_free(box);
}

/* An archive may hold a name twice: the later item counts. */
static void later_items_count(void **state)
{
    struct notes notes;
    struct box *box;

    (void)state;
    tree_file("one", "abc", 3, 0644);
    assert_int_equal(system("tar -cf twice.tar one && printf abd >one && tar -rf twice.tar one"), 0);
    box = box_make(NULL);
    assert_int_equal(box_take_archive(box, "twice.tar"), FIRN_OK);
    assert_int_equal(box_close_lid(box), FIRN_OK);
    list(box, FIRN_MANIFEST_SHA512, NULL, &notes);
    assert_string_equal(notes.words, SHA512_ABD "  one\n");
    assert_int_equal(check(box, ".", NULL, NULL, &notes).alike, 1);
    assert_string_equal(notes.words, "extra twice.tar\n");
    box_free(box);
}

/* ---- comparing ---- */

/* What is done to the folder, and what is then said. */
static const struct check_case { const char *what, *deed, *words; } check_cases[] = {
    { "alike", "true", "" },
    { "modes and times do not count", "chmod 0600 quay/abc && touch quay/maps quay/abc", "" },
    { "a copy in the place of a hard link is as good", "cp quay/abc x && mv x quay/maps/same", "" },
    { "missing", "rm quay/abc quay/maps/abd", "missing abc\nmissing maps/abd\n" },
    { "a folder missing", "rm -r quay/maps", "missing maps\nmissing maps/abd\nmissing maps/link\nmissing maps/same\n" },
    { "extra", "mkdir quay/new && touch quay/new/file", "extra new\nextra new/file\n" },
    { "other bytes", "printf abx >quay/maps/abd", "changed maps/abd: the same size, other bytes\n" },
    { "cut short", "printf ab >quay/maps/abd", "changed maps/abd: of another size\n" },
    { "a link leads elsewhere", "ln -sfn abd quay/maps/link", "changed maps/link: the link leads elsewhere\n" },
    { "a folder for a file", "rm quay/abc && mkdir quay/abc", "changed abc: of another type\n" },
    { "a link for a folder is not followed", "mv quay/maps elsewhere && ln -s ../elsewhere quay/maps",
      "changed maps: of another type\nmissing maps/abd\nmissing maps/link\nmissing maps/same\n" },
    { "a file for a pipe", "rm quay/pipe && touch quay/pipe", "changed pipe: of another type\n" },
};

static void checks(void **state)
{
    const struct check_case *c = *state;
    struct firn_manifest_check_report report;
    uint64_t told = 0;
    struct notes notes;
    struct box *box;

    make_quay();
    box = pack_quay(NULL);
    assert_int_equal(system(c->deed), 0);
    report = check(box, "quay", "quay", NULL, &notes);
    assert_string_equal(notes.words, c->words);
    for (size_t i = 0; i < FIRN_MANIFEST_KINDS; i++)
        told += report.findings[i];
    assert_int_equal(report.items, 7);
    assert_int_equal(report.alike + told - report.findings[FIRN_MANIFEST_EXTRA], report.items);
    box_free(box);
}

static void checks_what_is_chosen(void **state)
{
    const char *words[] = { "quay/maps", "*.new" };
    struct firn_pattern *patterns;
    struct notes notes;
    struct box *box;

    (void)state;
    make_quay();
    box = pack_quay(NULL);
    assert_int_equal(system("rm quay/abc && printf abx >quay/maps/abd && touch quay/x quay/y.new quay/maps/z"), 0);
    assert_int_equal(firn_pattern_make(words, 2, firn_memory_system(), &patterns), FIRN_OK);
    assert_int_equal(check(box, ".", NULL, patterns, &notes).items, 4);
    assert_string_equal(notes.words,
                        "changed quay/maps/abd: the same size, other bytes\nextra quay/maps/z\nextra quay/y.new\n");
    firn_pattern_free(patterns);
    box_free(box);
}

static void says_when_it_cannot(void **state)
{
    struct firn_manifest_check_options options = { .memory = firn_memory_system(), .folder = "nowhere" };
    struct firn_manifest_check_report report;
    char *name = calloc(1, 5000);
    struct box *box;

    (void)state;
    make_quay();
    box = pack_quay(NULL);
    assert_int_equal(firn_manifest_check(box->reader, &options, &box->fault, &report), FIRN_NO_INPUT);
    memset(name, 'n', 4999);
    options.folder = "quay";
    options.choice.below = name;
    assert_int_equal(firn_manifest_check(box->reader, &options, &box->fault, &report), FIRN_BAD_ARGUMENT);
    free(name);
    box_free(box);
}

static void lives_without_memory(void **state)
{
    struct fault_memory memory;
    struct box *box;
    enum firn_status status = FIRN_NO_MEMORY;

    (void)state;
    make_quay();
    box = pack_quay(NULL);
    for (unsigned n = 1; status != FIRN_OK; n++) {
        struct notes notes = { "" };
        const struct firn_manifest_options listing = {
            .memory = &memory.memory, .algorithm = FIRN_MANIFEST_SHA512, .self = &notes, .file = note_file
        };
        const struct firn_manifest_check_options checking = {
            .memory = &memory.memory, .folder = ".", .self = &notes, .finding = note_finding
        };
        struct firn_manifest_report listed;
        struct firn_manifest_check_report checked;

        fault_memory_make(&memory, n);
        status = firn_manifest_list(box->reader, &listing, &box->fault, &listed);
        assert_int_equal(memory.outstanding, 0);
        if (status == FIRN_OK)
            status = firn_manifest_check(box->reader, &checking, &box->fault, &checked);
        assert_true(status == FIRN_OK || status == FIRN_NO_MEMORY);
        assert_int_equal(memory.outstanding, 0);
    }
    box_free(box);
}

/* ---- each test in a scratch folder of its own ---- */

static int enter(void **state)
{
    (void)state;
    scratch_make();
    return chdir(scratch_path(""));
}

static int leave(void **state)
{
    (void)state;
    scratch_remove();
    return chdir("/");
}

int main(void)
{
    struct CMUnitTest tests[64];
    size_t count = 0;
    static const struct CMUnitTest others[] = {
        cmocka_unit_test(lists_large_files), cmocka_unit_test(never_digests_what_is_left),
        cmocka_unit_test(later_items_count), cmocka_unit_test(checks_what_is_chosen),
        cmocka_unit_test(says_when_it_cannot), cmocka_unit_test(lives_without_memory),
    };

    for (size_t i = 0; i < COUNT(list_cases); i++)
        tests[count++] = (struct CMUnitTest){ .name = list_cases[i].what, .test_func = lists,
                                              .initial_state = (void *)(uintptr_t)&list_cases[i] };
    for (size_t i = 0; i < COUNT(check_cases); i++)
        tests[count++] = (struct CMUnitTest){ .name = check_cases[i].what, .test_func = checks,
                                              .initial_state = (void *)(uintptr_t)&check_cases[i] };
    for (size_t i = 0; i < COUNT(others); i++)
        tests[count++] = others[i];
    for (size_t i = 0; i < count; i++) {
        tests[i].setup_func = enter;
        tests[i].teardown_func = leave;
    }
    return _cmocka_run_group_tests("manifest", tests, count, NULL, NULL);
}
