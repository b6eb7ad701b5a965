/* tests/transfer/test_outlet.c - giving back into a folder: choosing, what is in the way, loss, and evil containers */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "transfer/box.h"
#include "transfer/tree.h"

#include "help/fault_memory.h"
#include "help/scratch.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <cmocka.h>

#include <dirent.h>
#include <errno.h>
#include <fcntl.h>
#include <inttypes.h>
#include <signal.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/mount.h>
#include <sys/resource.h>
#include <sys/stat.h>
#include <sys/wait.h>
#include <sys/xattr.h>
#include <time.h>
#include <unistd.h>

static void run(const char *command)
{
    if (system(command) != 0)
        fail_msg("%s", command);
}

static int start_afresh(void **state)
{
    (void)state;
    (void)umask(022);
    run("rm -rf out kept-apart");
    run("mkdir kept-apart && echo precious > kept-apart/file && chmod 640 kept-apart/file");
    return 0;
}

/* Nothing that a run has begun is left lying about, and nothing outside of the target was touched. */
static int clean_after(void **state)
{
    (void)state;
    run("test -z \"$(find . -name '.firn-*')\"");
    run("test \"$(ls -A kept-apart)\" = file && test \"$(cat kept-apart/file)\" = precious && "
        "test \"$(stat -c %a kept-apart/file)\" = 640");
    return 0;
}

static struct box *packed(const char *path)
{
    struct box *box = box_make(NULL);

    assert_int_equal(box_take_path(box, path), FIRN_OK);
    assert_string_equal(box->notes, "");
    assert_int_equal(box_close_lid(box), FIRN_OK);
    return box;
}

/* ---- choosing ---- */

static const struct choice_case {
    const char *what, *words[3], *found;      /* of find(1) in the target, sorted */
    const char *notes;
    uint64_t chosen;
} choice_cases[] = {
    { "everything", { NULL }, "small small/a small/d small/d/b small/d/c small/d/hard small/link small/z", "", 8 },
    { "one file", { "small/d/b" }, "small small/d small/d/b", "", 1 },
    { "a folder", { "small/d" }, "small small/d small/d/b small/d/c small/d/hard", "", 4 },
    { "by its kind", { "[az]" }, "small small/a small/z", "", 2 },
    { "nothing", { "no such" }, "", "", 0 },
    { "a hard link without its file", { "small/d/hard" }, "small small/d small/d/hard", "", 1 },
    { "a hard link and its file", { "small/d/hard", "small/a" }, "small small/a small/d small/d/hard", "", 2 },
    { "two hard links without their file", { "small/d/hard", "small/z" }, "small small/d small/d/hard small/z", "", 2 },
};

static void chooses(void **state)
{
    const struct choice_case *c = *state;
    struct box *box = packed("small");
    struct firn_pattern *patterns = NULL;
    char found[1024];
    FILE *listing;
    size_t got, count = 0;

    while (count < 3 && c->words[count] != NULL)
        count++;
    if (count > 0)
        assert_int_equal(firn_pattern_make(c->words, count, firn_memory_system(), &patterns), FIRN_OK);
    box->outlet.patterns = patterns;
    assert_int_equal(box_give_folder(box, "out"), FIRN_OK);
    assert_string_equal(box->notes, c->notes);
    assert_int_equal(box->given.chosen, c->chosen);
    assert_int_equal(box->given.written, c->chosen);
    listing = popen("cd out && find . -mindepth 1 | sed 's,^./,,' | LC_ALL=C sort | tr '\\n' ' ' | sed 's/ $//'", "r");
    assert_non_null(listing);
    got = fread(found, 1, sizeof found - 1, listing);
    found[got] = '\0';
    assert_int_equal(pclose(listing), 0);
    assert_string_equal(found, c->found);
    if (strstr(c->found, "hard") != NULL)
        run("cmp out/small/d/hard small/d/hard");
    if (strstr(c->found, "hard") != NULL && strstr(c->found, "small/z") != NULL)
        run("test out/small/d/hard -ef out/small/z");
    firn_pattern_free(patterns);
    box_free(box);
}

/* ---- what is in the way ---- */

static const struct way_case {
    const char *what, *before;      /* makes the target */
    bool replace;
    const char *notes;
    const char *after;              /* must hold */
} way_cases[] = {
    { "the file is there", "mkdir -p out/small && echo mine > out/small/a", false,
      "exists small/a\nlink small/d/hard\nlink small/z\n",
      "test \"$(cat out/small/a)\" = mine && test -f out/small/d/b" },
    { "the file is there, replace", "mkdir -p out/small && echo mine > out/small/a", true, "",
      "cmp out/small/a small/a && test out/small/a -ef out/small/z" },
    { "the folder is there", "mkdir -p out/small/d && chmod 711 out/small/d", false, "",
      "test \"$(stat -c %a out/small/d)\" = 711 && cmp out/small/d/b small/d/b" },
    { "the folder is there, replace", "mkdir -p out/small/d && chmod 711 out/small/d", true, "",
      "test \"$(stat -c %a out/small/d)\" = \"$(stat -c %a small/d)\"" },
    { "a file where a folder goes", "mkdir -p out/small && echo mine > out/small/d", false,
      "exists small/d\nrefused small/d/b\nrefused small/d/c\nrefused small/d/hard\n",
      "test \"$(cat out/small/d)\" = mine" },
    { "a file where a folder goes, replace", "mkdir -p out/small && echo mine > out/small/d", true, "",
      "cmp out/small/d/b small/d/b" },
    { "a folder where a file goes", "mkdir -p out/small/a/x", false,
      "exists small/a\nlink small/d/hard\nlink small/z\n", "test -d out/small/a/x" },
    { "a folder where a file goes, replace", "mkdir -p out/small/a", true,
      "exists small/a\nlink small/d/hard\nlink small/z\n", "test -d out/small/a" },
    { "a folder where a link goes, replace", "mkdir -p out/small/link", true, "exists small/link\n",
      "test -d out/small/link" },
    { "a link out of the target where a folder goes", "mkdir -p out/small && ln -s ../../kept-apart out/small/d", false,
      "exists small/d\nrefused small/d/b\nrefused small/d/c\nrefused small/d/hard\n", "test -L out/small/d" },
    { "a link out of the target where a folder goes, replace",
      "mkdir -p out/small && ln -s ../../kept-apart out/small/d", true, "",
      "test -d out/small/d && test ! -L out/small/d" },
    { "a link out of the target where a file goes", "mkdir -p out/small && ln -s ../../kept-apart/file out/small/a",
      false, "exists small/a\nlink small/d/hard\nlink small/z\n", "test -L out/small/a" },
    { "a link out of the target where a file goes, replace",
      "mkdir -p out/small && ln -s ../../kept-apart/file out/small/a", true, "", "test ! -L out/small/a" },
    { "a broken link where a file goes", "mkdir -p out/small && ln -s nowhere out/small/a", false,
      "exists small/a\nlink small/d/hard\nlink small/z\n", "test -L out/small/a && test ! -e out/small/nowhere" },
    { "a link where a link goes", "mkdir -p out/small && ln -s mine out/small/link", false, "exists small/link\n",
      "test \"$(readlink out/small/link)\" = mine" },
    { "a link where a link goes, replace", "mkdir -p out/small && ln -s mine out/small/link", true, "",
      "test \"$(readlink out/small/link)\" = a" },
    { "the file where a hard link goes", "mkdir -p out/small && echo mine > out/small/z", false, "exists small/z\n",
      "test \"$(cat out/small/z)\" = mine" },
    { "everything already, replace", "cp -a small/. out-small 2>/dev/null; mkdir out && mv out-small out/small", true,
      "", "test out/small/a -ef out/small/z && test out/small/a -ef out/small/d/hard" },
};

static void meets_things(void **state)
{
    const struct way_case *c = *state;
    struct box *box = packed("small");

    run(c->before);
    box->outlet.replace = c->replace;
    assert_int_equal(box_give_folder(box, "out"), FIRN_OK);
    assert_string_equal(box->notes, c->notes);
    run(c->after);
    box_free(box);
}

/* ---- metadata ---- */

static void ignores_the_umask(void **state)
{
    struct box *box = packed("modes");

    (void)state;
    (void)umask(077);
    assert_int_equal(box_give_folder(box, "out"), FIRN_OK);
    (void)umask(022);
    assert_string_equal(box->notes, "");
    assert_int_equal(tree_differences("modes", "out/modes", TREE_ANY_OWNER), 0);
    box_free(box);
}

/* What an ordinary user gets back of a collection that root packed. */
static int restore_as_nobody(void *self)
{
    struct box *box = self;
    struct stat facts;

    if (!scratch_be_nobody())
        return 1;
    if (box_give_folder(box, "out") != FIRN_OK)
        return 2;
    if (strcmp(box->notes, "refused all/loop\nrefused all/null\n") != 0) {
        fprintf(stderr, "%s", box->notes);
        return 3;
    }
    if (lstat("out/all/setuid", &facts) != 0 || (facts.st_mode & 07777) != 0755 || facts.st_uid != geteuid())
        return 4;
    if (lgetxattr("out/all/capable", "security.capability", NULL, 0) >= 0)
        return 5;
    if (lgetxattr("out/all/noted", "user.note", NULL, 0) != 9)
        return 6;
    if (lstat("out/all/sub", &facts) != 0 || facts.st_mtim.tv_nsec != 999999999 || (facts.st_mode & 07777) != 0750)
        return 7;
    return 0;
}

static void restores_without_rights(void **state)
{
    struct box *box;

    (void)state;
    if (geteuid() != 0) {
        print_message("skipped: needs root to pack what others may not have\n");
        skip();
    }
    box = packed("all");
    tree_folder("out", 0777);
    assert_int_equal(scratch_in_child(restore_as_nobody, box), 0);
    box_free(box);
}

/* An ordinary user's own set-user-id file comes back as such: the owner it means is the one that gets it. */
static int own_setuid(void *self)
{
    struct box *box;
    struct stat facts;

    (void)self;
    if (!scratch_be_nobody())
        return 1;
    box = box_make(NULL);
    tree_folder("out/in", 0755);
    tree_file("out/in/tool", "x", 1, 04755);
    tree_folder("out/in/locked", 0755);
    tree_file("out/in/locked/file", "x", 1, 0);
    if (chmod("out/in/locked/file", 0400) != 0 || box_take_path(box, "out/in") != FIRN_OK ||
        box_close_lid(box) != FIRN_OK)
        return 2;
    if (box_give_folder(box, "out/again") != FIRN_OK || box->notes[0] != '\0')
        return 3;
    if (lstat("out/again/out/in/tool", &facts) != 0 || (facts.st_mode & 07777) != 04755)
        return 4;
    box_free(box);
    return 0;
}

static void keeps_own_setuid(void **state)
{
    (void)state;
    tree_folder("out", 0777);
    assert_int_equal(scratch_in_child(own_setuid, NULL), 0);
}

/* Folders nobody may enter or write to, with things in them: packed by root, restored by a user, still filled. */
static int restore_locked(void *self)
{
    struct box *box = self;
    struct stat facts;

    if (!scratch_be_nobody())
        return 1;
    if (box_give_folder(box, "out") != FIRN_OK || box->notes[0] != '\0') {
        fprintf(stderr, "%s", box->notes);
        return 2;
    }
    if (lstat("out/locked", &facts) != 0 || (facts.st_mode & 07777) != 0)
        return 3;
    if (chmod("out/locked", 0700) != 0 || lstat("out/locked/inner", &facts) != 0 || (facts.st_mode & 07777) != 0555)
        return 4;
    if (facts.st_mtim.tv_sec != 77 || access("out/locked/inner/file", R_OK) != 0)
        return 5;
    return chmod("out/locked/inner", 0755) == 0 ? 0 : 6;
}

static void fills_locked_folders(void **state)
{
    struct box *box;

    (void)state;
    if (geteuid() != 0) {
        print_message("skipped: needs root to pack what is locked\n");
        skip();
    }
    box = packed("locked");
    tree_folder("out", 0777);
    assert_int_equal(scratch_in_child(restore_locked, box), 0);
    box_free(box);
}

/* Owners by name: what this system calls them counts, not the number that another system gave them. */
static void finds_owners_by_name(void **state)
{
    const struct { enum firn_outlet_owner owner; uid_t uid; gid_t gid; } rows[] = {
        { FIRN_OUTLET_OWNER_NAMES, 1, 2 },           /* daemon and bin, on every Debian */
        { FIRN_OUTLET_OWNER_NUMBERS, 4711, 4712 },
        { FIRN_OUTLET_OWNER_NONE, geteuid(), getegid() },
    };
    struct box *box;

    (void)state;
    if (geteuid() != 0) {
        print_message("skipped: only root gives files away\n");
        skip();
    }
    box = box_make(NULL);
    run("printf x > owned && tar --format=pax --owner=daemon:4711 --group=bin:4712 -cf a owned && rm owned");
    assert_int_equal(box_take_archive(box, "a"), FIRN_OK);
    assert_int_equal(box_close_lid(box), FIRN_OK);
    for (size_t i = 0; i < sizeof rows / sizeof rows[0]; i++) {
        struct stat facts;

        run("rm -rf out");
        box->outlet.owner = rows[i].owner;
        assert_int_equal(box_give_folder(box, "out"), FIRN_OK);
        assert_string_equal(box->notes, "");
        assert_int_equal(lstat("out/owned", &facts), 0);
        assert_int_equal(facts.st_uid, rows[i].uid);
        assert_int_equal(facts.st_gid, rows[i].gid);
    }
    box_free(box);
}

/* ---- loss ---- */

/* What a finding said, for comparing with the bytes. */
struct loss {
    uint64_t bytes, lost, count;
    struct firn_outlet_range ranges[64];
    bool kept;
};

static struct loss loss;

static void keep_loss(void *self, const struct firn_outlet_finding *finding)
{
    struct box *box = self;

    (void)snprintf(box->notes + strlen(box->notes), 200, "%d %s\n", (int)finding->kind, finding->path);
    if (finding->kind != FIRN_OUTLET_LOST)
        return;
    assert_true(finding->range_count <= 64);
    loss = (struct loss){ .bytes = finding->bytes, .lost = finding->lost_bytes, .count = finding->range_count,
                          .kept = finding->kept };
    memcpy(loss.ranges, finding->ranges, finding->range_count * sizeof loss.ranges[0]);
}

static bool in_gap(uint64_t at)
{
    for (uint64_t i = 0; i < loss.count; i++)
        if (at >= loss.ranges[i].at && at < loss.ranges[i].at + loss.ranges[i].bytes)
            return true;
    return false;
}

/* What is said to be lost is zeros, all else is right, and the two add up. */
static void check_kept(const char *given, const char *was)
{
    uint64_t lost = 0;
    size_t counts[2];
    uint8_t *bytes[2] = { scratch_read(given, &counts[0]), scratch_read(was, &counts[1]) };

    assert_true(bytes[0] != NULL && bytes[1] != NULL && counts[0] == counts[1] && counts[0] == loss.bytes);
    for (size_t i = 0; i < counts[0]; i++) {
        lost += in_gap(i);
        if (bytes[0][i] != (in_gap(i) ? 0 : bytes[1][i]))
            fail_msg("byte %zu", i);
    }
    assert_int_equal(lost, loss.lost);
    assert_true(lost > 0 && lost < counts[0]);
    free(bytes[0]);
    free(bytes[1]);
}

/* NAME.gaps says the same as the finding: a line of words, then "offset length reason place". */
static void check_gaps(const char *path)
{
    FILE *file = fopen(path, "r");
    char line[8192], reason[32];
    uint64_t at, bytes, place;

    assert_non_null(file);
    assert_non_null(fgets(line, sizeof line, file));
    assert_int_equal(line[0], '#');
    for (uint64_t i = 0; i < loss.count; i++) {
        assert_non_null(fgets(line, sizeof line, file));
        assert_int_equal(sscanf(line, "%" SCNu64 " %" SCNu64 " %31s %" SCNu64, &at, &bytes, reason, &place), 4);
        assert_int_equal(at, loss.ranges[i].at);
        assert_int_equal(bytes, loss.ranges[i].bytes);
        assert_string_equal(reason, "blocks-lost");
        assert_int_equal(place, loss.ranges[i].container_at);
        assert_int_equal(place % 4096, 0);
    }
    assert_null(fgets(line, sizeof line, file));
    (void)fclose(file);
}

static struct box *damaged(void)
{
    struct box *box = packed("lossy");

    /* two holes in the content of the large file: no reserve, so they stay */
    box_wipe(box, 300, 3);
    box_wipe(box, 900, 1);
    assert_int_equal(box_open_again(box), FIRN_OK);
    box->outlet.finding = keep_loss;
    loss = (struct loss){ 0 };
    return box;
}

static void leaves_out_what_is_lost(void **state)
{
    struct box *box = damaged();

    (void)state;
    assert_int_equal(box_give_folder(box, "out"), FIRN_OK);
    assert_string_equal(box->notes, "2 lossy/m\n4 lossy/same as m\n");      /* lost, and a link to what is not there */
    assert_int_not_equal(access("out/lossy/m", F_OK), 0);
    assert_int_not_equal(access("out/lossy/m.gaps", F_OK), 0);
    assert_false(loss.kept);
    assert_int_equal(box->given.lost_bytes, loss.lost);
    run("cmp out/lossy/a lossy/a && cmp out/lossy/z lossy/z");
    assert_int_equal(box->given.written + 2, box->given.chosen);
    box_free(box);
}

static void keeps_what_is_left(void **state)
{
    struct box *box = damaged();

    (void)state;
    box->outlet.keep_incomplete = true;
    assert_int_equal(box_give_folder(box, "out"), FIRN_OK);
    assert_string_equal(box->notes, "2 lossy/m\n4 lossy/same as m\n");      /* the link leads to what is not whole */
    assert_true(loss.kept);
    assert_int_equal(box->given.kept, 2);
    assert_int_equal(box->given.kept + box->given.written, box->given.chosen);
    assert_true(loss.count >= 2);
    run("test out/lossy/m -ef 'out/lossy/same as m'");
    check_kept("out/lossy/m", "lossy/m");
    check_gaps("out/lossy/m.gaps");
    box_free(box);
}

/* Where its list of gaps cannot be put, the file is not either: it would pass for whole. */
static void keeps_nothing_without_its_gaps(void **state)
{
    struct box *box = damaged();

    (void)state;
    run("mkdir -p out/lossy && echo mine > out/lossy/m.gaps");
    box->outlet.keep_incomplete = true;
    assert_int_equal(box_give_folder(box, "out"), FIRN_OK);
    assert_string_equal(box->notes, "0 lossy/m\n2 lossy/m\n4 lossy/same as m\n");
    assert_false(loss.kept);
    assert_int_not_equal(access("out/lossy/m", F_OK), 0);
    run("test \"$(cat out/lossy/m.gaps)\" = mine");
    box->outlet.replace = true;
    assert_int_equal(box_give_folder(box, "out"), FIRN_OK);
    assert_true(loss.kept);
    check_kept("out/lossy/m", "lossy/m");
    box_free(box);
}

/* ---- containers nobody should have made ---- */

enum { EVIL_ITEMS = 4 };

struct evil_item { const char *path; char type; const char *target; };

static const struct evil_case {
    const char *what;
    struct evil_item items[EVIL_ITEMS];
    const char *notes;
} evil_cases[] = {
    { "an absolute name", { { "/etc/firn-test", '0', NULL } }, "refused /etc/firn-test\n" },
    { "up", { { "../kept-apart/file", '0', NULL } }, "refused ../kept-apart/file\n" },
    { "up in the middle", { { "a/../../kept-apart/new", '0', NULL } }, "refused a/../../kept-apart/new\n" },
    { "up at the end", { { "a/..", '5', NULL } }, "refused a/..\n" },
    { "a dot", { { ".", '5', NULL } }, "refused .\n" },
    { "no name", { { "", '0', NULL } }, "refused \n" },
    { "a slash", { { "/", '5', NULL } }, "refused /\n" },
    { "slashes", { { "a//b", '0', NULL } }, "refused a//b\n" },
    { "a link, then through it", { { "l", '2', "../kept-apart" }, { "l/new", '0', NULL } }, "refused l/new\n" },
    { "a link, then a folder of its name",
      { { "l", '2', "../kept-apart" }, { "l", '5', NULL }, { "l/file", '0', NULL } },
      "exists l\nrefused l/file\n" },
    { "an absolute link, then through it", { { "l", '2', "/tmp" }, { "l/new", '0', NULL } }, "refused l/new\n" },
    { "a folder, then a link of its name, then through it",
      { { "d", '5', NULL }, { "d", '2', "../kept-apart" }, { "d/new", '0', NULL } },
      "exists d\n" },
    { "a link in a folder, then through both",
      { { "d", '5', NULL }, { "d/l", '2', "../../kept-apart" }, { "d/l/new", '0', NULL } },
      "refused d/l/new\n" },
    { "a hard link to outside", { { "h", '1', "../kept-apart/file" } }, "refused h\n" },
    { "a hard link to an absolute name", { { "h", '1', "/etc/passwd" } }, "refused h\n" },
    { "a hard link through a link", { { "l", '2', "../kept-apart" }, { "h", '1', "l/file" } }, "link h\n" },
    { "a hard link to nothing", { { "h", '1', "no such" } }, "link h\n" },
    { "a hard link to itself", { { "h", '1', "h" } }, "link h\n" },
    { "a hard link to what was there before", { { "h", '1', "before" } }, "link h\n" },
    { "a hard link to a folder", { { "d", '5', NULL }, { "h", '1', "d" } }, "link h\n" },
    { "a device", { { "null", '3', NULL } }, "refused null\n" },
    { "another device", { { "disk", '4', NULL } }, "refused disk\n" },
    { "a file where a folder was", { { "d", '5', NULL }, { "d", '0', NULL } }, "exists d\n" },
    { "the same file twice", { { "f", '0', NULL }, { "f", '0', NULL } }, "exists f\n" },
    { "below a file", { { "f", '0', NULL }, { "f/g", '0', NULL } }, "refused f/g\n" },
    { "an unknown type", { { "x", 'Z', NULL } }, "refused \n" },
    { "a global header", { { "x", 'g', NULL } }, "refused \n" },
    { "a name too long for any file system",
      { { "0123456789012345678901234567890123456789012345678901234567890123456789012345678901234567890123456789"
          "0123456789012345678901234567890123456789012345678901234567890123456789012345678901234567890123456789"
          "0123456789012345678901234567890123456789012345678901234567890123456789",
          '0', NULL } },
      "failed 0123456789012345678901234567890123456789012345678901234567890123456789012345678901234567890123456789"
      "0123456789012345678901234567890123456789012345678901234567890123456789012345678901234567890123456789"
      "0123456789012345678901234567890123456789012345678901234567890123456789\n" },
};

static void seal(uint8_t *header)
{
    unsigned sum = 0;

    memset(header + 148, ' ', 8);
    for (unsigned i = 0; i < 512; i++)
        sum += header[i];
    (void)snprintf((char *)header + 148, 8, "%06o", sum);
}

/* A pax header by hand: the long name in a record, then a header of that type. */
static size_t make_header(uint8_t *bytes, const struct evil_item *item, unsigned size)
{
    size_t at = 0;

    memset(bytes, 0, 2048);
    if (strlen(item->path) > 99) {
        (void)snprintf((char *)bytes, 100, "PaxHeader/x");
        at = (size_t)snprintf((char *)bytes + 512, 1024, "%zu path=%s\n", strlen(item->path) + 10, item->path);
        (void)snprintf((char *)bytes + 124, 12, "%011o", (unsigned)at);
        bytes[156] = 'x';
        memcpy(bytes + 257, "ustar\0" "00", 8);
        seal(bytes);
        at = 1024;
    }
    (void)snprintf((char *)bytes + at, 100, "%.99s", item->path);
    memcpy(bytes + at + 100, "0000755", 8);
    memcpy(bytes + at + 108, "0000000", 8);
    memcpy(bytes + at + 116, "0000000", 8);
    (void)snprintf((char *)bytes + at + 124, 12, "%011o", size);
    memcpy(bytes + at + 136, "00000000005", 12);
    bytes[at + 156] = (uint8_t)item->type;
    if (item->target != NULL)
        (void)snprintf((char *)bytes + at + 157, 100, "%s", item->target);
    memcpy(bytes + at + 257, "ustar\0" "00", 8);
    memcpy(bytes + at + 329, "0000001", 8);
    memcpy(bytes + at + 337, "0000003", 8);
    seal(bytes + at);
    return at + 512;
}

static struct box *evil_box(const struct evil_case *c)
{
    struct box *box = box_make(NULL);

    for (size_t i = 0; i < EVIL_ITEMS && c->items[i].path != NULL; i++) {
        bool content = c->items[i].type == '0';
        uint8_t header[2048];
        size_t count = make_header(header, &c->items[i], content ? 4 : 0);

        box_put(box, header, count, content, "evil", content ? 4 : 0);
    }
    assert_int_equal(box_close_lid(box), FIRN_OK);
    return box;
}

static void stays_inside(void **state)
{
    const struct evil_case *c = *state;
    struct box *box = evil_box(c);

    run("mkdir out && echo before > out/before");
    assert_int_equal(box_give_folder(box, "out"), FIRN_OK);
    assert_string_equal(box->notes, c->notes);
    run("test \"$(cat out/before)\" = before && test \"$(stat -c %h out/before)\" = 1");
    run("test ! -e /etc/firn-test && test ! -e /tmp/new");
    /* with leave to replace, outside is still outside */
    box->outlet.replace = true;
    assert_int_equal(box_give_folder(box, "out"), FIRN_OK);
    run("test ! -e /etc/firn-test && test ! -e /tmp/new");
    box_free(box);
}

/* The header says one thing, the catalogue another. */
static void refuses_contradictions(void **state)
{
    static const struct evil_item file = { "f", '0', NULL }, folder = { "d", '5', NULL };
    struct box *box = box_make(NULL);
    uint8_t header[2048];

    (void)state;
    box_put(box, header, make_header(header, &file, 5), true, "four", 4);
    box_put(box, header, make_header(header, &file, 4), false, NULL, 0);
    box_put(box, header, make_header(header, &folder, 0), true, "four", 4);
    box_put(box, header, make_header(header, &file, 4), true, "four", 4);
    assert_int_equal(box_close_lid(box), FIRN_OK);
    assert_int_equal(box_give_folder(box, "out"), FIRN_OK);
    assert_string_equal(box->notes, "refused \nrefused \nrefused \n");
    run("test \"$(ls -A out)\" = f && test \"$(cat out/f)\" = four");
    box_free(box);
}

/* ---- trouble of the system ---- */

static void cannot_make_its_folder(void **state)
{
    struct box *box = packed("small");

    (void)state;
    assert_int_equal(box_give_folder(box, "out/below/what/is/not/there"), FIRN_CANNOT_CREATE);
    assert_int_equal(box->fault.os_error, ENOENT);
    assert_int_equal(box_give_folder(box, "small/a"), FIRN_CANNOT_CREATE);
    assert_int_equal(box->fault.os_error, ENOTDIR);
    box_free(box);
}

/* A file that may not become that large is one finding; the rest is there. */
static int limited(void *self)
{
    const struct rlimit limit = { .rlim_cur = 1 << 20, .rlim_max = 1 << 20 };
    struct box *box = self;

    (void)signal(SIGXFSZ, SIG_IGN);
    if (setrlimit(RLIMIT_FSIZE, &limit) != 0)
        return 1;
    if (box_give_folder(box, "out") != FIRN_OK)
        return 2;
    if (strcmp(box->notes, "failed lossy/m\nlink lossy/same as m\n") != 0)
        return 3;
    return 0;
}

static void meets_a_limit(void **state)
{
    struct box *box = packed("lossy");

    (void)state;
    assert_int_equal(scratch_in_child(limited, box), 0);
    run("cmp out/lossy/a lossy/a && cmp out/lossy/z lossy/z && test ! -e out/lossy/m");
    box_free(box);
}

/* A full file system ends the work and says so; what is whole stays. */
static void meets_a_full_medium(void **state)
{
    enum firn_status status;
    struct box *box;
    int outcome;

    (void)state;
    tree_folder("out", 0755);
    if (mount("none", "out", "tmpfs", 0, "size=1m") != 0) {
        print_message("skipped: no file system can be mounted here\n");
        skip();
    }
    box = packed("lossy");
    status = box_give_folder(box, "out");
    outcome = system("cmp out/lossy/a lossy/a && test ! -e out/lossy/m && test -z \"$(find out -name '.firn-*')\"");
    assert_int_equal(umount("out"), 0);
    assert_int_equal(status, FIRN_IO);
    assert_int_equal(box->fault.os_error, ENOSPC);
    assert_int_equal(outcome, 0);
    box_free(box);
}

/* A run that is killed leaves only whole files under their names. */
static void leaves_whole_files_when_killed(void **state)
{
    struct box *box = packed("lossy");

    (void)state;
    for (unsigned wait_us = 500; wait_us < 40000; wait_us *= 2) {
        pid_t child;

        run("rm -rf out");
        (void)fflush(NULL);
        child = fork();
        assert_true(child >= 0);
        if (child == 0) {
            (void)box_give_folder(box, "out");
            _exit(0);
        }
        (void)nanosleep(&(struct timespec){ .tv_nsec = 1000L * wait_us }, NULL);
        (void)kill(child, SIGKILL);
        (void)scratch_wait(child);
        run("test ! -e out || (cd out && find . -type f ! -name '.firn-*' | while read -r f; do cmp \"$f\" \"../$f\" "
            "|| exit 1; "
            "done)");
        run("test ! -e out || test $(find out -name '.firn-*' | wc -l) -le 1");
    }
    run("rm -rf out");
    box_free(box);
}

static bool stop_now(void *self)
{
    return *(bool *)self;
}

static void stops(void **state)
{
    struct box *box = packed("lossy");
    bool stop = false;
    const struct firn_reader_options options = {
        .store = &box->store, .memory = firn_memory_system(), .threads = 1, .stop = stop_now, .stop_self = &stop
    };

    (void)state;
    firn_reader_free(box->reader);
    assert_int_equal(firn_reader_open(&options, &box->fault, &box->reader), FIRN_OK);
    stop = true;
    assert_int_equal(box_give_folder(box, "out"), FIRN_STOPPED);
    box_free(box);
}

static void lives_without_memory(void **state)
{
    enum firn_status status = FIRN_NO_MEMORY;
    struct box *box = packed("all");

    (void)state;
    box->outlet.devices = geteuid() == 0;
    for (unsigned n = 1; status != FIRN_OK; n++) {
        struct fault_memory fault;

        fault_memory_make(&fault, n);
        box->outlet.memory = &fault.memory;
        run("rm -rf out");
        status = box_give_folder(box, "out");
        assert_true(status == FIRN_OK || status == FIRN_NO_MEMORY);
        assert_int_equal(fault.outstanding, 0);
        run("test -z \"$(find . -name '.firn-*')\"");
    }
    assert_string_equal(box->notes, "");
    box_free(box);
}

static int set_up(void **state)
{
    (void)state;
    scratch_make();
    assert_int_equal(chdir(scratch_path("")), 0);
    tree_of_everything("all");
    tree_folder("small", 0755);
    tree_folder("small/d", 0750);
    tree_file("small/a", "shared", 6, 0644);
    tree_file("small/d/b", "b", 1, 0644);
    tree_file("small/d/c", "c", 1, 0644);
    assert_int_equal(link("small/a", "small/d/hard"), 0);
    assert_int_equal(link("small/a", "small/z"), 0);
    assert_int_equal(symlink("a", "small/link"), 0);
    tree_folder("modes", 0755);
    tree_file("modes/open", "x", 1, 0777);
    tree_file("modes/shut", "x", 1, geteuid() == 0 ? 0 : 0400);
    tree_folder("modes/folder", 01777);
    tree_folder("modes/shut folder", geteuid() == 0 ? 0 : 0500);
    assert_int_equal(mkfifo("modes/fifo", 0600) == 0 && chmod("modes/fifo", 0666) == 0, 1);
    tree_folder("locked", 0755);
    tree_folder("locked/inner", 0755);
    tree_file("locked/inner/file", "x", 1, 0644);
    tree_time("locked/inner", 77, 0);
    assert_int_equal(chmod("locked/inner", 0555), 0);
    if (geteuid() == 0)
        assert_int_equal(chmod("locked", 0), 0);
    tree_folder("lossy", 0755);
    tree_pattern("lossy/a", 300000, 11);
    tree_pattern("lossy/m", 4000000, 12);
    tree_file("lossy/z", "last", 4, 0644);
    assert_int_equal(link("lossy/m", "lossy/same as m"), 0);
    return 0;
}

static int tear_down(void **state)
{
    (void)state;
    run("chmod -R u+rwX .");
    scratch_remove();
    return 0;
}

#define COUNT(array) (sizeof(array) / sizeof(array)[0])

int main(void)
{
    struct CMUnitTest tests[128];
    size_t count = 0;
#define WHOLE(test) cmocka_unit_test_setup_teardown(test, start_afresh, clean_after)
    static const struct CMUnitTest others[] = {
        WHOLE(ignores_the_umask),       WHOLE(restores_without_rights), WHOLE(keeps_own_setuid),
        WHOLE(fills_locked_folders),    WHOLE(finds_owners_by_name),    WHOLE(leaves_out_what_is_lost),
        WHOLE(keeps_what_is_left),      WHOLE(refuses_contradictions),  WHOLE(keeps_nothing_without_its_gaps),
        WHOLE(cannot_make_its_folder),  WHOLE(meets_a_limit),           WHOLE(meets_a_full_medium),
        WHOLE(stops),                   WHOLE(lives_without_memory),    WHOLE(leaves_whole_files_when_killed),
    };

#define ROWS(function, rows)                                                                                           \
    for (size_t i = 0; i < COUNT(rows); i++)                                                                           \
    tests[count++] = (struct CMUnitTest){ .name = (rows)[i].what,                                                      \
                                          .test_func = function,                                                       \
                                          .setup_func = start_afresh,                                                  \
                                          .teardown_func = clean_after,                                                \
                                          .initial_state = (void *)(uintptr_t) & (rows)[i] }
    ROWS(chooses, choice_cases);
    ROWS(meets_things, way_cases);
    ROWS(stays_inside, evil_cases);
    for (size_t i = 0; i < COUNT(others); i++)
        tests[count++] = others[i];
    return _cmocka_run_group_tests("outlet", tests, count, set_up, tear_down);
}
