/*
 * tests/transfer/test_intake.c - folders taken in: names, order, links, holes, depth, and everything that can go wrong
 */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "transfer/box.h"
#include "transfer/tree.h"

#include "help/fault_memory.h"
#include "help/scratch.h"
#include "transfer/intake_walk.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <cmocka.h>

#include <dirent.h>
#include <errno.h>
#include <fcntl.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/socket.h>
#include <sys/un.h>
#include <unistd.h>

/* ---- names and order ---- */

/* Operands, and the stored names that come of them. */
static const struct operand_case {
    const char *what, *operands[3], *items, *notes;
} operand_cases[] = {
    { "a folder", { "names" }, "names\nnames/A\nnames/B\nnames/B/x\nnames/a\nnames/a.\nnames/\xC3\xA9\n", "" },
    { "with a slash", { "names/B/" }, "names/B\nnames/B/x\n", "" },
    { "with dots", { "./names/../names//B/." }, "names/B\nnames/B/x\n", "" },
    { "through another folder", { "other/../names/B" }, "names/B\nnames/B/x\n", "" },
    { "a file", { "names/A" }, "names/A\n", "" },
    { "a link", { "to-names" }, "to-names\n", "" },
    { "a link with a slash", { "to-names/" },
      "to-names\nto-names/A\nto-names/B\nto-names/B/x\nto-names/a\nto-names/a.\nto-names/\xC3\xA9\n", "" },
    { "two", { "names/B", "names/A" }, "names/B\nnames/B/x\nnames/A\n", "" },
    { "the same twice", { "names/B", "./names/B" }, "names/B\nnames/B/x\n", "skipped ./names/B\n" },
    { "the inner one last", { "names/B", "names/B/x" }, "names/B\nnames/B/x\n", "skipped names/B/x\n" },
    { "the inner one first", { "names/B/x", "names/B" }, "names/B/x\nnames/B\n", "skipped names/B/x\n" },
    { "the innermost first", { "names/B/x", "names/B", "names" },
      "names/B/x\nnames/B\nnames\nnames/A\nnames/a\nnames/a.\nnames/\xC3\xA9\n",
      "skipped names/B/x\nskipped names/B\n" },
    { "the same name, another file", { "names/A", "other/../clash/names/A" }, "names/A\nclash/names/A\n", "" },
    { "not there", { "missing", "names/A" }, "names/A\n", "unreadable missing\n" },
    { "below a file", { "names/A/x" }, "", "unreadable names/A/x\n" },
    { "a socket", { "socket" }, "", "unsupported socket\n" },
};

static void takes_operands(void **state)
{
    const struct operand_case *c = *state;
    struct box *box = box_make(NULL);
    size_t count = 0;

    while (count < 3 && c->operands[count] != NULL)
        count++;
    assert_int_equal(firn_intake_paths(box->writer, c->operands, count, &box->intake, &box->fault, &box->taken),
                     FIRN_OK);
    assert_string_equal(box->items, c->items);
    assert_string_equal(box->notes, c->notes);
    box_free(box);
}

/* Operands relative to another folder, so that dots lead out of it and names meet. */
static const struct operand_case inner_cases[] = {
    { "dot", { "." }, "names\nnames/A\nother\n", "" },
    { "up", { "../names/A" }, "names/A\n", "" },
    { "up, and one of that name", { "../names/A", "names/A" }, "names/A\n", "duplicate names/A\n" },
    { "up, and a folder of that name", { "../names/B", "names" }, "names/B\nnames/B/x\nnames\nnames/A\n", "" },
    { "a file where a folder was stored",
      { "../other/deep/names", "other" },
      "other/deep/names\n",
      "duplicate other\n" },
    { "a folder's name is a file's", { "other", "../other/deep" }, "other\n", "duplicate ../other/deep\n" },
    { "dot, and one in it", { ".", "names/A" }, "names\nnames/A\nother\n", "skipped names/A\n" },
    { "one in it, and dot", { "names/A", "." }, "names/A\nnames\nother\n", "skipped ./names/A\n" },
    { "dot, and one that is not in it", { ".", "../names/B/x" }, "names\nnames/A\nother\nnames/B/x\n", "" },
};

static void takes_inner_operands(void **state)
{
    assert_int_equal(chdir("clash"), 0);
    takes_operands(state);
    assert_int_equal(chdir(".."), 0);
}

static void refuses_no_path(void **state)
{
    struct box *box = box_make(NULL);

    (void)state;
    assert_int_equal(box_take_path(box, ""), FIRN_BAD_ARGUMENT);
    box_free(box);
}

static void excludes(void **state)
{
    static const char *const words[] = { "[B]", "*.", "names/A" };
    struct box *box = box_make(NULL);

    (void)state;
    assert_int_equal(firn_pattern_make(words, 3, firn_memory_system(), &box->intake.exclude), FIRN_OK);
    assert_int_equal(box_take_path(box, "names"), FIRN_OK);
    assert_string_equal(box->items, "names\nnames/a\nnames/\xC3\xA9\n");
    assert_int_equal(box->taken.excluded, 3);
    assert_int_equal(firn_intake_left_out(&box->taken), 0);
    firn_pattern_free(box->intake.exclude);
    box_free(box);
}

static void spares_the_container(void **state)
{
    struct box *box = box_make(NULL);
    struct firn_intake_file own;
    struct stat facts;

    (void)state;
    assert_int_equal(lstat("names/a", &facts), 0);
    own = (struct firn_intake_file){ .device = facts.st_dev, .inode = facts.st_ino };
    box->intake.own = &own;
    box->intake.own_count = 1;
    assert_int_equal(box_take_path(box, "names"), FIRN_OK);
    assert_string_equal(box->notes, "skipped names/a\n");
    assert_int_equal(box->taken.items, 6);
    assert_int_equal(firn_intake_left_out(&box->taken), 0);
    box_free(box);
}

/* ---- counting beforehand ---- */

static void counts(void **state)
{
    const char *path = "all";
    struct box *box = box_make(NULL);
    struct firn_intake_report counted;

    (void)state;
    assert_int_equal(firn_intake_paths(NULL, &path, 1, &box->intake, &box->fault, &counted), FIRN_OK);
    assert_int_equal(box_take_path(box, path), FIRN_OK);
    assert_int_equal(counted.items, box->taken.items);
    assert_in_range(counted.bytes, box->taken.bytes, 3 * box->taken.bytes);      /* "same as large" counts twice */
    box_free(box);
}

/* ---- links ---- */

static void knows_hard_links(void **state)
{
    struct box *box = box_make(NULL);

    (void)state;
    assert_int_equal(box_take_path(box, "links"), FIRN_OK);
    assert_string_equal(box->items, "links\nlinks/a\nlinks/b -> links/a\nlinks/c\nlinks/c/d -> links/a\n");
    assert_int_equal(box->taken.hard_links, 2);
    assert_int_equal(box->taken.bytes, 3);
    /* SHA-256 of "abc" (FIPS 180-2, appendix B), told again with the link */
    assert_memory_equal(box->sha256, "\xba\x78\x16\xbf\x8f\x01\xcf\xea", 8);
    box_free(box);
}

/* A first name that is left out does not keep the others from being files. */
static void first_name_left_out(void **state)
{
    static const char *const word = "links/a";
    struct box *box = box_make(NULL);

    (void)state;
    assert_int_equal(firn_pattern_make(&word, 1, firn_memory_system(), &box->intake.exclude), FIRN_OK);
    assert_int_equal(box_take_path(box, "links"), FIRN_OK);
    assert_string_equal(box->items, "links\nlinks/b\nlinks/c\nlinks/c/d -> links/b\n");
    firn_pattern_free(box->intake.exclude);
    box_free(box);
}

/* ---- holes ---- */

static void knows_holes(void **state)
{
    struct box *box = box_make(NULL);

    (void)state;
    tree_file("huge", "start", 5, 0644);
    assert_int_equal(truncate("huge", 300000000), 0);
    assert_int_equal(box_take_path(box, "huge"), FIRN_OK);
    assert_in_range(box->taken.bytes, 5, 1 << 16);
    assert_int_equal(box_close_lid(box), FIRN_OK);
    assert_int_equal(box->totals.content_bytes, 300000000);
    box->outlet.owner = FIRN_OUTLET_OWNER_NONE;
    tree_folder("huge-out", 0755);
    assert_int_equal(box_give_folder(box, "huge-out"), FIRN_OK);
    assert_string_equal(box->notes, "");
    tree_folder("huge-in", 0755);
    assert_int_equal(rename("huge", "huge-in/huge"), 0);
    assert_int_equal(tree_differences("huge-in", "huge-out", TREE_ANY_OWNER), 0);
    box_free(box);
}

/* ---- depth ---- */

enum { DEEP = 1100 };

static unsigned open_descriptors(void)
{
    DIR *list = opendir("/proc/self/fd");
    unsigned count = 0;

    assert_non_null(list);
    while (readdir(list) != NULL)
        count++;
    closedir(list);
    return count;
}

static unsigned most_open;

static void watch_descriptors(void *self, const struct firn_intake_item *item)
{
    unsigned now = open_descriptors();

    (void)item;
    ++*(unsigned *)self;
    most_open = now > most_open ? now : most_open;
}

/*
 * Folders in folders, made from inside since no path would reach them; a file beside each folder, so that ways lead
 * back.
 */
static void make_deep(const char *path, unsigned depth, const char *name)
{
    int start = open(".", O_RDONLY | O_DIRECTORY);

    tree_folder(path, 0755);
    assert_true(start >= 0 && chdir(path) == 0);
    for (unsigned i = 0; i < depth; i++) {
        tree_file("z", "z", 1, 0644);
        tree_folder(name, 0755);
        assert_int_equal(chdir(name), 0);
    }
    assert_int_equal(fchdir(start), 0);
    close(start);
}

/* Takes it apart again, which nftw with full paths could not. */
static void remove_deep(const char *path, const char *name, unsigned depth)
{
    int start = open(".", O_RDONLY | O_DIRECTORY);

    assert_true(start >= 0 && chdir(path) == 0);
    for (unsigned i = 0; i < depth; i++)
        assert_int_equal(chdir(name), 0);
    for (unsigned i = 0; i < depth; i++) {
        assert_int_equal(chdir(".."), 0);
        assert_true(rmdir(name) == 0 && unlink("z") == 0);
    }
    assert_int_equal(fchdir(start), 0);
    close(start);
    assert_int_equal(rmdir(path), 0);
}

static void goes_deep(void **state)
{
    struct box *box = box_make(NULL);
    unsigned before, items = 0;

    (void)state;
    make_deep("deep", DEEP, "d");
    box->intake.item = watch_descriptors;
    box->intake.self = &items;
    box->intake.finding = NULL;
    most_open = 0;
    before = open_descriptors();
    assert_int_equal(box_take_path(box, "deep"), FIRN_OK);
    assert_int_equal(items, 2 * DEEP + 1);
    assert_int_equal(firn_intake_left_out(&box->taken), 0);
    assert_in_range(most_open, before, before + FIRN_INTAKE_WALK_OPEN + 8);
    assert_int_equal(open_descriptors(), before);
    assert_int_equal(box_close_lid(box), FIRN_OK);
    assert_int_equal(box_give_folder(box, "deep-out"), FIRN_OK);
    assert_int_equal(box->given.written, 2 * DEEP + 1);
    assert_string_equal(box->notes, "");
    assert_int_equal(tree_differences("deep", "deep-out/deep", TREE_ANY_OWNER), 0);
    assert_int_equal(open_descriptors(), before);
    box_free(box);
    remove_deep("deep", "d", DEEP);
    remove_deep("deep-out/deep", "d", DEEP);
}

/* Names longer than PATH_MAX together cannot be stored: said once for each name, the rest is there. */
static void goes_too_deep(void **state)
{
    static const char
        name[] = "a rather long name for a folder that lies in itself again and again, a hundred bytes in all ......";
    struct box *box = box_make(NULL);

    (void)state;
    make_deep("long", 60, name);
    assert_int_equal(box_take_path(box, "long"), FIRN_OK);
    assert_int_equal(strncmp(box->notes, "unsupported long/", 17), 0);
    assert_int_equal(box->taken.findings[FIRN_INTAKE_UNSUPPORTED], firn_intake_left_out(&box->taken));
    assert_in_range(box->taken.findings[FIRN_INTAKE_UNSUPPORTED], 1, 2);
    assert_in_range(box->taken.items, 80, 84);
    box_free(box);
    remove_deep("long", name, 60);
}

/* ---- what changes, vanishes, cannot be read ---- */

/* Does something to the files when the item called `when` has been stored, or when so many bytes have been read. */
struct meddler {
    struct box *box;
    const char *when;
    uint64_t bytes;
    void (*deed)(void);
};

static void meddle_item(void *self, const struct firn_intake_item *item)
{
    struct meddler *meddler = self;

    if (meddler->when != NULL && strcmp(item->name, meddler->when) == 0)
        meddler->deed();
}

static void meddle_progress(void *self, uint64_t items, uint64_t bytes)
{
    struct meddler *meddler = self;

    (void)items;
    if (meddler->bytes > 0 && bytes >= meddler->bytes) {
        meddler->bytes = 0;
        meddler->deed();
    }
}

static struct box *noted;

static void note_kind(void *self, const struct firn_intake_finding *finding)
{
    (void)self;
    (void)snprintf(noted->notes + strlen(noted->notes), 200, "%d %s\n", (int)finding->kind, finding->path);
}

static void grow(void) { assert_int_equal(truncate("moving/m", 6000000), 0); }
static void shrink(void) { assert_int_equal(truncate("moving/m", 2000000), 0); }
static void touch(void) { tree_time("moving/m", 5, 5); }
static void chmod_it(void) { assert_int_equal(chmod("moving/m", 0600), 0); }
static void take_away(void) { assert_int_equal(unlink("moving/m"), 0); }
static void swap_for_link(void) { take_away(); assert_int_equal(symlink("a", "moving/m"), 0); }
static void swap_for_fifo(void) { take_away(); assert_int_equal(mkfifo("moving/m", 0644), 0); }
static void swap_folder(void) { assert_int_equal(rename("moving", "moved"), 0); tree_folder("moving", 0755); }

static const struct change_case {
    const char *what, *when;
    uint64_t bytes;
    void (*deed)(void);
    int kind;                       /* of the finding; -1: none */
    unsigned items;
} change_cases[] = {
    { "grows while it is read", NULL, 1000000, grow, FIRN_INTAKE_CHANGED, 3 },
    { "shrinks while it is read", NULL, 1000000, shrink, FIRN_INTAKE_CHANGED, 3 },
    { "its time is set while it is read", NULL, 1000000, touch, FIRN_INTAKE_CHANGED, 3 },
    { "its mode is set while it is read", NULL, 1000000, chmod_it, FIRN_INTAKE_CHANGED, 3 },
    { "goes while it is read: what is open stays", NULL, 1000000, take_away, FIRN_INTAKE_CHANGED, 3 },
    { "goes before its turn", "moving/a", 0, take_away, FIRN_INTAKE_VANISHED, 3 },
    { "becomes a link before its turn", "moving/a", 0, swap_for_link, -1, 4 },
    { "becomes a fifo before its turn", "moving/a", 0, swap_for_fifo, -1, 4 },
    { "its folder is swapped: what is open stays", "moving/a", 0, swap_folder, -1, 4 },
};

static void meets_change(void **state)
{
    const struct change_case *c = *state;
    struct box *box = box_make(NULL);
    struct meddler meddler = { .box = box, .when = c->when, .bytes = c->bytes, .deed = c->deed };
    char expected[64] = "";
    struct stat facts;
    char *list;

    tree_folder("moving", 0755);
    tree_file("moving/a", "a", 1, 0644);
    tree_pattern("moving/m", 4000000, 7);
    tree_file("moving/z", "z", 1, 0644);
    noted = box;
    box->intake.self = &meddler;
    box->intake.item = meddle_item;
    box->intake.progress = meddle_progress;
    box->intake.finding = note_kind;
    assert_int_equal(box_take_path(box, "moving"), FIRN_OK);
    if (c->kind >= 0)
        (void)snprintf(expected, sizeof expected, "%d moving/m\n", c->kind);
    assert_string_equal(box->notes, expected);
    assert_int_equal(box->taken.items, c->items);
    assert_int_equal(firn_intake_left_out(&box->taken), c->kind >= 0);
    assert_int_equal(box_close_lid(box), FIRN_OK);
    list = box_list(box);
    assert_int_equal(strstr(list, "moving/m ") != NULL, c->kind < 0 || box->taken.traces > 0);
    free(list);
    /* whatever of it was written is never given back as the file */
    assert_int_equal(box_give_folder(box, "moving-out"), FIRN_OK);
    assert_int_equal(lstat("moving-out/moving/m", &facts) == 0, c->kind < 0);
    box_free(box);
    assert_int_equal(system("rm -rf moving moved moving-out"), 0);
}

/* Without root's rights: what may not be read is told, its folder is stored, the rest goes on. */
static int take_forbidden(void *self)
{
    struct box *box;

    (void)self;
    if (!scratch_be_nobody())
        return 1;
    box = box_make(NULL);
    if (box_take_path(box, "forbidden") != FIRN_OK)
        return 2;
    if (strcmp(box->notes, "unreadable forbidden/file\nunreadable forbidden/folder\n") != 0)
        return 3;
    if (strcmp(box->items, "forbidden\nforbidden/folder\nforbidden/open\n") != 0)
        return 4;
    if (firn_intake_left_out(&box->taken) != 2 || box->taken.traces != 0)
        return 5;
    box_free(box);
    return 0;
}

static void meets_refusal(void **state)
{
    (void)state;
    tree_folder("forbidden", 0755);
    tree_file("forbidden/file", "x", 1, 0);
    tree_folder("forbidden/folder", 0);
    tree_file("forbidden/open", "x", 1, 0644);
    assert_int_equal(scratch_in_child(take_forbidden, NULL), 0);
}

/* A file that claims more bytes than it gives: sysfs says 4096 of every attribute. */
static void meets_short_reads(void **state)
{
    static const char path[] = "/sys/kernel/uevent_seqnum";
    struct box *box;

    (void)state;
    if (access(path, R_OK) != 0) {
        print_message("skipped: no %s here\n", path);
        skip();
    }
    box = box_make(NULL);
    assert_int_equal(box_take_path(box, path), FIRN_OK);
    assert_string_equal(box->notes, "changed /sys/kernel/uevent_seqnum\n");
    assert_int_equal(box->taken.items, 0);
    box_free(box);
}

/* ---- stopping, and memory that runs out ---- */

static bool stop_after_three(void *self)
{
    return ++*(unsigned *)self > 3;
}

static void stops(void **state)
{
    struct box *box = box_make(NULL);
    unsigned asked = 0;

    (void)state;
    box->intake.finding = NULL;
    box->intake.item = NULL;
    box->intake.self = &asked;
    box->intake.stop = stop_after_three;
    assert_int_equal(box_take_path(box, "names"), FIRN_STOPPED);
    assert_int_equal(box->taken.items, 4);
    box_free(box);
}

static void lives_without_memory(void **state)
{
    enum firn_status status = FIRN_NO_MEMORY;
    unsigned before = open_descriptors();

    (void)state;
    for (unsigned n = 1; status != FIRN_OK; n++) {
        struct fault_memory fault;
        struct box *box;

        fault_memory_make(&fault, n);
        box = box_make(&fault.memory);
        status = box_take_path(box, "all");
        assert_true(status == FIRN_OK || status == FIRN_NO_MEMORY);
        box_free(box);
        assert_int_equal(fault.outstanding, 0);
    }
    assert_int_equal(open_descriptors(), before);
}

/* ---- the same input, the same bytes ---- */

static void same_bytes(void **state)
{
    struct box *boxes[2];
    uint8_t bytes[2][4096];
    uint64_t sizes[2] = { 0, 0 };
    int os_error;

    (void)state;
    for (unsigned i = 0; i < 2; i++) {
        boxes[i] = box_make(NULL);
        if (i == 1) {      /* read once already: only access times can differ now */
            assert_int_equal(system("cat all/*/* > /dev/null 2>&1; ls -lR all > /dev/null"), 0);
        }
        assert_int_equal(box_take_path(boxes[i], "all"), FIRN_OK);
        assert_int_equal(box_close_lid(boxes[i]), FIRN_OK);
        assert_int_equal(boxes[i]->store.size(boxes[i]->store.self, &sizes[i], &os_error), FIRN_OK);
    }
    assert_int_equal(sizes[0], sizes[1]);
    for (uint64_t at = 0; at < sizes[0]; at += sizeof bytes[0]) {
        size_t got[2];

        for (unsigned i = 0; i < 2; i++)
            assert_int_equal(boxes[i]->store.read_at(boxes[i]->store.self, at, bytes[i], sizeof bytes[i], &got[i],
                                                     &os_error), FIRN_OK);
        assert_memory_equal(bytes[0], bytes[1], got[0]);
    }
    box_free(boxes[0]);
    box_free(boxes[1]);
}

static void make_socket(const char *path)
{
    struct sockaddr_un address = { .sun_family = AF_UNIX };
    int file = socket(AF_UNIX, SOCK_STREAM, 0);

    (void)snprintf(address.sun_path, sizeof address.sun_path, "%s", path);
    assert_int_equal(bind(file, (const struct sockaddr *)&address, sizeof address), 0);
    close(file);
}

static int set_up(void **state)
{
    (void)state;
    scratch_make();
    assert_int_equal(chdir(scratch_path("")), 0);
    tree_of_everything("all");
    tree_folder("names", 0755);
    tree_file("names/a", "1", 1, 0644);
    tree_file("names/a.", "2", 1, 0644);
    tree_folder("names/B", 0755);
    tree_file("names/B/x", "3", 1, 0644);
    tree_file("names/\xC3\xA9", "4", 1, 0644);
    tree_file("names/A", "5", 1, 0644);
    tree_folder("other", 0755);
    tree_folder("other/deep", 0755);
    tree_file("other/deep/names", "6", 1, 0644);
    tree_folder("clash", 0755);
    tree_folder("clash/names", 0755);
    tree_file("clash/names/A", "7", 1, 0644);
    tree_file("clash/other", "8", 1, 0644);
    assert_int_equal(symlink("names", "to-names"), 0);
    make_socket("socket");
    tree_folder("links", 0755);
    tree_folder("links/c", 0755);
    tree_file("links/a", "abc", 3, 0644);
    assert_int_equal(link("links/a", "links/b"), 0);
    assert_int_equal(link("links/a", "links/c/d"), 0);
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
    struct CMUnitTest tests[80];
    size_t count = 0;
    static const struct CMUnitTest others[] = {
        cmocka_unit_test(refuses_no_path), cmocka_unit_test(excludes), cmocka_unit_test(spares_the_container),
        cmocka_unit_test(counts), cmocka_unit_test(knows_hard_links), cmocka_unit_test(first_name_left_out),
        cmocka_unit_test(knows_holes), cmocka_unit_test(goes_deep), cmocka_unit_test(goes_too_deep),
        cmocka_unit_test(meets_refusal), cmocka_unit_test(meets_short_reads), cmocka_unit_test(stops),
        cmocka_unit_test(lives_without_memory), cmocka_unit_test(same_bytes),
    };

#define ROWS(function, rows)                                                                                           \
    for (size_t i = 0; i < COUNT(rows); i++)                                                                           \
    tests[count++] = (struct CMUnitTest){ .name = (rows)[i].what,                                                      \
                                          .test_func = function,                                                       \
                                          .initial_state = (void *)(uintptr_t) & (rows)[i] }
    ROWS(takes_operands, operand_cases);
    ROWS(takes_inner_operands, inner_cases);
    ROWS(meets_change, change_cases);
    for (size_t i = 0; i < COUNT(others); i++)
        tests[count++] = others[i];
    return _cmocka_run_group_tests("intake", tests, count, set_up, tear_down);
}
