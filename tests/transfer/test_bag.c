/*
 * tests/transfer/test_bag.c - bags as RFC 8493 describes them, and as nobody should make them
 *
 * The bags are made here by the shell, their digests by sha256sum, sha512sum, sha1sum and md5sum of GNU coreutils.
 * SPDX-License-Identifier: BSD-2-Clause
 */
#include "firn/bag.h"

#include "help/fault_memory.h"
#include "help/scratch.h"
#include "transfer/box.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <unistd.h>

#include <cmocka.h>

#define COUNT(array) (sizeof(array) / sizeof(array)[0])

enum { NOTES_ROOM = 1 << 14 };

/*
 * A bag with a hole in a file, a hard link, a name that must be escaped, and tag files. "digest" writes manifests with
 * any algorithm, "tags" the tag manifest.
 */
static const char good[] =
    "mkdir -p bag/data/maps && cd bag && printf abc >data/abc && printf '%s' 'x' >\"data/100%\n\" &&\n"
    "head -c 100000 /dev/urandom >data/maps/sparse && truncate -s 500000 data/maps/sparse &&\n"
    "printf end >>data/maps/sparse && ln data/abc data/maps/same && ln -s abc data/link && : >data/empty &&\n"
    "printf 'BagIt-Version: 1.0\\nTag-File-Character-Encoding: UTF-8\\n' >bagit.txt &&\n"
    "printf 'Source-Organization: Marrow Quay\\nPAYLOAD-OXUM: 500010.5\\nNote: one\\n  and more\\n' >bag-info.txt\n"
    "digest() { for a; do for f in abc empty maps/same maps/sparse; do ${a}sum data/$f; done >manifest-$a.txt\n"
    "printf '%s  data/100%%25%%0A\\n' $(${a}sum <'data/100%\n' | cut -d' ' -f1) >>manifest-$a.txt; done; }\n"
    "tags() { for a; do ${a}sum bagit.txt bag-info.txt manifest-*.txt 2>/dev/null >tagmanifest-$a.txt; done; }\n";

static void run(const char *deed)
{
    size_t room = sizeof good + strlen(deed) + 8;
    char *script = malloc(room);

    assert_non_null(script);
    (void)snprintf(script, room, "%s%s", good, deed);
    assert_int_equal(system(script), 0);
    free(script);
}

struct watch {
    struct firn_bag *bag;
    enum firn_status status;
    char notes[NOTES_ROOM];
};

static void see(void *self, const struct firn_intake_item *item)
{
    struct watch *watch = self;

    if (watch->status == FIRN_OK)
        watch->status = firn_bag_see(watch->bag, item);
}

static void note(void *self, const struct firn_bag_finding *finding)
{
    static const char *const kinds[] = { "missing", "mismatch", "unlisted", "unproved", "oxum" };
    struct watch *watch = self;
    size_t used = strlen(watch->notes);

    (void)snprintf(watch->notes + used, NOTES_ROOM - used, "%s %s%s%s\n", kinds[finding->kind], finding->path,
                   finding->detail[0] == '\0' ? "" : ": ", finding->detail);
}

/* Takes an operand in and judges it as a bag. */
static struct firn_bag_report judge(struct watch *watch, const char *operand, const struct firn_memory *memory)
{
    struct box *box = box_make(NULL);
    struct firn_bag_report report = { 0 };
    struct firn_fault fault = { 0 };

    *watch = (struct watch){ .status = FIRN_OK };
    watch->status = firn_bag_open(operand, memory, &fault, &watch->bag);
    if (watch->status == FIRN_OK) {
        assert_non_null(watch->bag);
        box->intake.self = watch;
        box->intake.item = see;
        box->intake.finding = NULL;
        box->intake.digests = firn_bag_digests(watch->bag);
        assert_int_equal(box_take_path(box, operand), FIRN_OK);
        firn_bag_finish(watch->bag, note, watch, &report);
    }
    box_free(box);
    return report;
}

/* ---- verdicts ---- */

static const struct bag_case { const char *what, *deed, *operand, *notes; } bag_cases[] = {
    { "valid by SHA-256", "digest sha256", "bag", "" },
    { "valid by SHA-512, the default of RFC 8493", "digest sha512", "bag", "" },
    { "valid by SHA-1 and MD5, as old bags are", "digest sha1 md5", "bag", "" },
    { "valid by all, with tag manifests", "digest sha256 sha512 sha1 md5; tags sha512 md5", "bag", "" },
    { "reached from inside it", "digest sha512; tags sha1", "bag/.", "" },
    { "upper case, tabs, CRLF",
      "digest sha256; sed -i 's/^[0-9a-f]*/\\U&/; s/  /\\t \\t/; s/$/\\r/' manifest-sha256.txt", "bag", "" },
    { "a binary mark", "digest md5; sed -i 's/  / */' manifest-md5.txt", "bag", "" },
    { "an algorithm that is unknown here beside one that is not",
      "digest sha256; echo 00 data/abc >manifest-whirlpool.txt", "bag", "" },
    { "a flipped bit", "digest sha512; printf abd >data/empty", "bag",
      "mismatch data/empty: sha512\noxum bag-info.txt: 500010.5, but it is 500013.5\n" },
    { "behind a hole", "digest sha1; printf End | dd of=data/maps/sparse bs=1 seek=500000 conv=notrunc status=none",
      "bag", "mismatch data/maps/sparse: sha1\n" },
    { "a hole where bytes were",
      "digest md5; dd if=/dev/zero of=data/maps/sparse bs=1 count=9 conv=notrunc status=none", "bag",
      "mismatch data/maps/sparse: md5\n" },
    { "one digest wrong, the other right", "digest sha256 md5; sed -i '1s/^......../00000000/' manifest-md5.txt", "bag",
      "mismatch data/abc: md5\n" },
    { "a hard link with another digest", "digest sha256; sed -i '/same/s/^......../00000000/' manifest-sha256.txt",
      "bag", "mismatch data/maps/same: sha256\n" },
    { "missing", "digest sha256; rm data/empty", "bag",
      "missing data/empty\noxum bag-info.txt: 500010.5, but it is 500010.4\n" },
    { "to be fetched", "digest sha256; rm data/empty; echo 'http://quay.example/e 0 data/empty' >fetch.txt", "bag",
      "missing data/empty: fetch.txt tells where it was to be had\n"
      "oxum bag-info.txt: 500010.5, but it is 500010.4\n" },
    { "fetched", "digest sha256; echo 'http://quay.example/e\t-  data/empty' >fetch.txt", "bag", "" },
    { "payload that nobody lists", "digest sha256; printf 1 >data/extra; rm bag-info.txt", "bag",
      "unlisted data/extra: sha256\n" },
    { "listed by one manifest of two, in version 1.0", "digest sha256 md5; sed -i 1d manifest-md5.txt", "bag",
      "unlisted data/abc: md5\n" },
    { "the same before version 1.0", "digest sha256 md5; sed -i 1d manifest-md5.txt; sed -i s/1.0/0.97/ bagit.txt",
      "bag", "" },
    { "listed by none, before version 1.0", "digest md5; sed -i 1d manifest-md5.txt; sed -i s/1.0/0.96/ bagit.txt",
      "bag", "unlisted data/abc\n" },
    { "a link in the place of a file", "digest sha256; rm data/empty; ln -s /dev/null data/empty", "bag",
      "missing data/empty\noxum bag-info.txt: 500010.5, but it is 500010.4\n" },
    { "a tag file changed", "digest sha256; tags sha512; echo 'Contact-Name: Nobody' >>bag-info.txt", "bag",
      "mismatch bag-info.txt: sha512\n" },
    { "a manifest changed with its payload", "digest sha256; tags sha256; printf abd >data/abc; digest sha256", "bag",
      "mismatch manifest-sha256.txt: sha256\n" },
    { "a tag file missing", "digest sha256; tags md5; rm bag-info.txt", "bag", "missing bag-info.txt\n" },
};

static void judges(void **state)
{
    const struct bag_case *c = *state;
    struct firn_bag_report report;
    struct watch watch;

    run(c->deed);
    report = judge(&watch, c->operand, firn_memory_system());
    assert_int_equal(watch.status, FIRN_OK);
    assert_string_equal(watch.notes, c->notes);
    assert_int_equal(report.valid, c->notes[0] == '\0');
    firn_bag_free(watch.bag);
}

static void tells_what_it_went_by(void **state)
{
    struct firn_bag_report report;
    struct watch watch;

    (void)state;
    run("digest md5; echo 00 data/abc >manifest-whirlpool.txt");
    report = judge(&watch, "bag", firn_memory_system());
    assert_string_equal(report.algorithms, "md5");
    assert_string_equal(report.unknown, "whirlpool");
    assert_int_equal(report.files, 5);
    assert_int_equal(report.bytes, 500010);
    firn_bag_free(watch.bag);
}

/* A file whose other name lies in another operand cannot be proved by this one's bytes. */
static void needs_the_bytes_of_links(void **state)
{
    const char *operands[] = { "elsewhere", "bag" };
    struct firn_bag_report report;
    struct watch watch = { .status = FIRN_OK };
    struct firn_fault fault;
    struct box *box = box_make(NULL);

    (void)state;
    run("digest sha256; rm bag-info.txt; mkdir ../elsewhere && ln data/empty ../elsewhere/first");
    assert_int_equal(firn_bag_open("bag", firn_memory_system(), &fault, &watch.bag), FIRN_OK);
    box->intake.self = &watch;
    box->intake.item = see;
    assert_int_equal(firn_intake_paths(box->writer, operands, 2, &box->intake, &fault, &box->taken), FIRN_OK);
    firn_bag_finish(watch.bag, note, &watch, &report);
    assert_string_equal(watch.notes, "unproved data/empty\n");
    firn_bag_free(watch.bag);
    box_free(box);
}

/* ---- what is no bag ---- */

static const struct no_case { const char *what, *deed; const char *operand; } no_cases[] = {
    { "a folder without bagit.txt", "rm bagit.txt; digest md5", "bag" },
    { "a file", "true", "bag/bagit.txt" },
    { "nothing", "true", "nowhere" },
    { "a link to a bag is stored as a link", "digest md5; ln -s bag ../link", "link" },
};

static void passes_over(void **state)
{
    const struct no_case *c = *state;
    struct firn_bag *bag;
    struct firn_fault fault;

    run(c->deed);
    assert_int_equal(firn_bag_open(c->operand, firn_memory_system(), &fault, &bag), FIRN_OK);
    assert_null(bag);
}

static const struct bad_case { const char *what, *deed, *told; uint64_t line; } bad_cases[] = {
    { "an empty declaration", "digest md5; : >bagit.txt",
      "bag/bagit.txt: lacks one of the two lines that make a bag", 0 },
    { "another encoding", "digest md5; sed -i s/UTF-8/Latin-1/ bagit.txt",
      "bag/bagit.txt: neither BagIt-Version nor Tag-File-Character-Encoding: UTF-8", 2 },
    { "no version", "digest md5; sed -i 's/1.0/one/' bagit.txt",
      "bag/bagit.txt: neither BagIt-Version nor Tag-File-Character-Encoding: UTF-8", 1 },
    { "no manifest", "true", "bag/bagit.txt: a bag without a payload manifest", 0 },
    { "tag manifests alone", "tags md5 || true", "bag/bagit.txt: a bag without a payload manifest", 0 },
    { "no manifest that is known", "echo 00 data/abc >manifest-whirlpool.txt",
      "bag/bagit.txt: a bag with no payload manifest that can be checked here", 0 },
    { "a short digest", "digest md5; sed -i '2s/^.//' manifest-md5.txt",
      "bag/manifest-md5.txt: a line that is not a digest and a path", 2 },
    { "no path", "digest md5; sed -i '3s/ .*//' manifest-md5.txt",
      "bag/manifest-md5.txt: a line that is not a digest and a path", 3 },
    { "a path out of the bag", "digest md5; sed -i '1s,data,../../etc,' manifest-md5.txt",
      "bag/manifest-md5.txt: a path that leads out of the bag, or is none", 1 },
    { "a path from the root", "digest md5; sed -i '1s,data,/data,' manifest-md5.txt",
      "bag/manifest-md5.txt: a path that leads out of the bag, or is none", 1 },
    { "a path out of the bag in fetch.txt", "digest md5; echo 'http://quay.example/ 1 data/../../x' >fetch.txt",
      "bag/fetch.txt: a path that leads out of the bag, or is none", 1 },
    { "fetch.txt without a path", "digest md5; echo 'http://quay.example/ 1' >fetch.txt",
      "bag/fetch.txt: no URL, length and path", 1 },
    { "listed twice, differently", "digest md5; sed '1!d; s/^..../0000/' manifest-md5.txt >x; cat x >>manifest-md5.txt",
      "bag/manifest-md5.txt: a path listed twice with different digests", 6 },
    { "an Oxum that is none", "digest md5; sed -i 's/500010.5/many/' bag-info.txt",
      "bag/bag-info.txt: a Payload-Oxum that is no OCTETS.FILES, or a second one", 2 },
    { "two of them", "digest md5; echo 'Payload-Oxum: 1.1' >>bag-info.txt",
      "bag/bag-info.txt: a Payload-Oxum that is no OCTETS.FILES, or a second one", 5 },
    { "a NUL", "digest md5; printf 'a\\0b\\n' >>manifest-md5.txt", "bag/manifest-md5.txt: a NUL in a line", 6 },
};

static void refuses(void **state)
{
    const struct bad_case *c = *state;
    struct firn_bag *bag;
    struct firn_fault fault = { 0 };

    run(c->deed);
    assert_int_equal(firn_bag_open("bag", firn_memory_system(), &fault, &bag), FIRN_BAD_DATA);
    assert_null(bag);
    assert_string_equal(fault.what, c->told);
    assert_int_equal(fault.at, c->line);
}

static void lives_without_memory(void **state)
{
    enum firn_status status = FIRN_NO_MEMORY;

    (void)state;
    run("digest sha256 md5; tags sha1");
    for (unsigned n = 1; status != FIRN_OK; n++) {
        struct fault_memory memory;
        struct watch watch;

        fault_memory_make(&memory, n);
        (void)judge(&watch, "bag", &memory.memory);
        status = watch.status;
        assert_true(status == FIRN_OK || status == FIRN_NO_MEMORY);
        firn_bag_free(watch.bag);
        assert_int_equal(memory.outstanding, 0);
    }
}

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
        cmocka_unit_test(tells_what_it_went_by), cmocka_unit_test(needs_the_bytes_of_links),
        cmocka_unit_test(lives_without_memory),
    };

    for (size_t i = 0; i < COUNT(bag_cases); i++)
        tests[count++] = (struct CMUnitTest){ .name = bag_cases[i].what, .test_func = judges,
                                              .initial_state = (void *)(uintptr_t)&bag_cases[i] };
    for (size_t i = 0; i < COUNT(no_cases); i++)
        tests[count++] = (struct CMUnitTest){ .name = no_cases[i].what, .test_func = passes_over,
                                              .initial_state = (void *)(uintptr_t)&no_cases[i] };
    for (size_t i = 0; i < COUNT(bad_cases); i++)
        tests[count++] = (struct CMUnitTest){ .name = bad_cases[i].what, .test_func = refuses,
                                              .initial_state = (void *)(uintptr_t)&bad_cases[i] };
    for (size_t i = 0; i < COUNT(others); i++)
        tests[count++] = others[i];
    for (size_t i = 0; i < count; i++) {
        tests[i].setup_func = enter;
        tests[i].teardown_func = leave;
    }
    return _cmocka_run_group_tests("bag", tests, count, NULL, NULL);
}
