/* tests/transfer/test_tar.c - giving back as a pax archive, read by GNU tar and by our own intake */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "transfer/box.h"
#include "transfer/tree.h"

#include "help/fault_memory.h"
#include "help/scratch.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <cmocka.h>

#include <errno.h>
#include <fcntl.h>
#include <signal.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/stat.h>
#include <sys/xattr.h>
#include <unistd.h>

static void run(const char *command)
{
    if (system(command) != 0)
        fail_msg("%s", command);
}

static int start_afresh(void **state)
{
    (void)state;
    run("rm -rf out *.tar");
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

/* What GNU tar makes of it; names that are no UTF-8, and what other systems add, are no trouble to it. */
static void tar_restores_it(void **state)
{
    struct box *box = packed("all");

    (void)state;
    assert_int_equal(box_give_tar(box, "a.tar"), FIRN_OK);
    assert_string_equal(box->notes, "");
    assert_int_equal(box->given.written, box->taken.items);
    run("mkdir out && tar --xattrs --xattrs-include='*' --acls --numeric-owner -C out -xpf a.tar 2> said || "
        "{ cat said; false; }");
    run("! grep -Ev \"unknown extended header keyword 'hdrcharset'|implausibly old|in the future\" said");
    assert_int_equal(tree_differences("all", "out/all", 0), 0);
    box_free(box);
}

static void tar_lists_it(void **state)
{
    struct box *box = packed("plain");
    char said[1024];
    FILE *listing;
    size_t got;

    (void)state;
    assert_int_equal(box_give_tar(box, "a.tar"), FIRN_OK);
    if (geteuid() != 0) {
        print_message("skipped: the listing below is of what root owns\n");
        box_free(box);
        skip();
    }
    listing = popen("LC_ALL=C TZ=UTC0 tar --full-time --numeric-owner -tvf - < a.tar 2>&1", "r");
    assert_non_null(listing);
    got = fread(said, 1, sizeof said - 1, listing);
    said[got] = '\0';
    assert_int_equal(pclose(listing), 0);
    assert_string_equal(said,
                        "drwxr-x--- 0/0               0 1970-01-01 00:00:05 plain/\n"
                        "-rw-r----- 0/0               5 1969-12-31 23:59:58 plain/early\n"
                        "hrw-r----- 0/0               0 1969-12-31 23:59:58 plain/hard link to plain/early\n"
                        "lrwxrwxrwx 0/0               0 2009-02-13 23:31:30.25 plain/link -> early\n"
                        "-rw-r--r-- 0/0         3000000 2242-03-16 12:56:32.000000001 plain/sparse\n");
    box_free(box);
}

/* Through our own intake and out again, nothing is different. */
static void comes_back(void **state)
{
    struct box *box = packed("all"), *again = box_make(NULL);

    (void)state;
    assert_int_equal(box_give_tar(box, "a.tar"), FIRN_OK);
    assert_int_equal(box_take_archive(again, "a.tar"), FIRN_OK);
    assert_string_equal(again->notes, "");
    assert_int_equal(box_close_lid(again), FIRN_OK);
    again->outlet.owner = FIRN_OUTLET_OWNER_NUMBERS;
    again->outlet.devices = true;
    assert_int_equal(box_give_folder(again, "out"), FIRN_OK);
    assert_string_equal(again->notes, "");
    assert_int_equal(tree_differences("all", "out/all", 0), 0);
    assert_int_equal(box_give_tar(again, "b.tar"), FIRN_OK);
    run("cmp a.tar b.tar");
    box_free(box);
    box_free(again);
}

static void same_items_same_bytes(void **state)
{
    struct box *one = packed("all"), *other = packed("all");

    (void)state;
    assert_int_equal(box_give_tar(one, "a.tar"), FIRN_OK);
    assert_int_equal(box_give_tar(one, "b.tar"), FIRN_OK);
    assert_int_equal(box_give_tar(other, "c.tar"), FIRN_OK);
    run("cmp a.tar b.tar && cmp a.tar c.tar");
    box_free(one);
    box_free(other);
}

static const struct choice_case {
    const char *what, *word, *listed;
} choice_cases[] = {
    { "a file", "plain/early", "plain/early\n" },
    { "a hard link without its file", "plain/hard", "plain/hard\n" },
    { "by kind", "*[kd]", "plain/hard\nplain/link\n" },
    { "nothing", "no such", "" },
};

static void chooses(void **state)
{
    const struct choice_case *c = *state;
    struct box *box = packed("plain");
    char listed[256];
    FILE *listing;
    size_t got;

    assert_int_equal(firn_pattern_make(&c->word, 1, firn_memory_system(), &box->outlet.patterns), FIRN_OK);
    assert_int_equal(box_give_tar(box, "a.tar"), FIRN_OK);
    assert_string_equal(box->notes, "");
    listing = popen("tar -tf a.tar 2> said", "r");
    assert_non_null(listing);
    got = fread(listed, 1, sizeof listed - 1, listing);
    listed[got] = '\0';
    assert_int_equal(pclose(listing), 0);
    assert_string_equal(listed, c->listed);
    if (strstr(c->listed, "hard") != NULL)
        run("mkdir out && tar -C out -xf a.tar 2> said && cmp out/plain/hard plain/early");
    firn_pattern_free(box->outlet.patterns);
    box_free(box);
}

/* ---- loss ---- */

static struct box *damaged(void)
{
    struct box *box = packed("lossy");

    box_wipe(box, 300, 3);
    assert_int_equal(box_open_again(box), FIRN_OK);
    return box;
}

static void leaves_out_what_is_lost(void **state)
{
    struct box *box = damaged();

    (void)state;
    assert_int_equal(box_give_tar(box, "a.tar"), FIRN_OK);
    assert_string_equal(box->notes, "lost lossy/m\nlink lossy/same as m\n");
    assert_int_equal(box->given.chosen, 5);
    assert_int_equal(box->given.written, 3);
    assert_true(box->given.lost_bytes > 0);
    run("mkdir out && tar -C out -xf a.tar && test \"$(ls out/lossy | tr '\\n' ' ')\" = 'a z '");
    run("cmp out/lossy/a lossy/a && cmp out/lossy/z lossy/z");
    box_free(box);
}

static void keeps_what_is_left(void **state)
{
    struct box *box = damaged();

    (void)state;
    box->outlet.keep_incomplete = true;
    assert_int_equal(box_give_tar(box, "a.tar"), FIRN_OK);
    assert_string_equal(box->notes, "lost lossy/m kept\nlink lossy/same as m kept\n");
    assert_int_equal(box->given.kept, 2);
    run("mkdir out && tar -C out -xf a.tar && cmp out/lossy/a lossy/a && cmp out/lossy/z lossy/z");
    run("test $(stat -c %s out/lossy/m) = $(stat -c %s lossy/m)");
    /* one line of words, one gap; before it, in it and behind it as it says */
    run("test $(wc -l < out/lossy/m.gaps) = 2 && tail -1 out/lossy/m.gaps > gap && read -r at count why place < gap && "
        "test $why = blocks-lost && cmp -n $at out/lossy/m lossy/m && cmp -i $((at + count)) out/lossy/m lossy/m && "
        "tail -c +$((at + 1)) out/lossy/m | head -c $count | cmp -n $count - /dev/zero");
    box_free(box);
}

/* ---- names nobody should have stored ---- */

static void refuses_evil(void **state)
{
    struct box *box = box_make(NULL);
    uint8_t header[512] = { 0 };

    (void)state;
    (void)snprintf((char *)header, 100, "../up");
    memcpy(header + 100, "0000644", 8);
    memcpy(header + 124, "00000000000", 12);
    header[156] = '0';
    memcpy(header + 257, "ustar\0" "00", 8);
    for (unsigned round = 0; round < 2; round++) {
        unsigned sum = 8 * ' ';

        if (round == 1)
            (void)snprintf((char *)header, 100, "fine");
        for (unsigned i = 0; i < 512; i++)
            sum += i < 148 || i >= 156 ? header[i] : 0;
        (void)snprintf((char *)header + 148, 8, "%06o", sum);
        header[155] = ' ';
        box_put(box, header, sizeof header, true, NULL, 0);
    }
    assert_int_equal(box_close_lid(box), FIRN_OK);
    assert_int_equal(box_give_tar(box, "a.tar"), FIRN_OK);
    assert_string_equal(box->notes, "refused ../up\n");
    run("test \"$(tar -tf a.tar)\" = fine");
    box_free(box);
}

/* ---- trouble ---- */

static void tells_of_full_media(void **state)
{
    struct box *box = packed("lossy");

    (void)state;
    assert_int_equal(box_give_tar(box, "/dev/full"), FIRN_IO);
    assert_int_equal(box->fault.os_error, ENOSPC);
    box_free(box);
}

static void tells_of_broken_pipes(void **state)
{
    struct box *box = packed("lossy");
    int ends[2];

    (void)state;
    (void)signal(SIGPIPE, SIG_IGN);
    assert_int_equal(pipe(ends), 0);
    (void)close(ends[0]);
    assert_int_equal(firn_outlet_tar(box->reader, ends[1], &box->outlet, &box->fault, &box->given), FIRN_IO);
    assert_int_equal(box->fault.os_error, EPIPE);
    (void)close(ends[1]);
    (void)signal(SIGPIPE, SIG_DFL);
    box_free(box);
}

static void lives_without_memory(void **state)
{
    enum firn_status status = FIRN_NO_MEMORY;
    struct box *box = packed("all");

    (void)state;
    for (unsigned n = 1; status != FIRN_OK; n++) {
        struct fault_memory fault;

        fault_memory_make(&fault, n);
        box->outlet.memory = &fault.memory;
        status = box_give_tar(box, "a.tar");
        assert_true(status == FIRN_OK || status == FIRN_NO_MEMORY);
        assert_int_equal(fault.outstanding, 0);
    }
    assert_string_equal(box->notes, "");
    box_free(box);
}

/* A collection of folders alone: the reader asks for them only once. */
static void counts_folders_once(void **state)
{
    struct box *box = packed("folders");

    (void)state;
    assert_int_equal(box_give_tar(box, "a.tar"), FIRN_OK);
    assert_int_equal(box->given.chosen, 2);
    assert_int_equal(box->given.written, 2);
    run("test \"$(tar -tf a.tar | tr '\\n' ' ')\" = 'folders/ folders/inner/ '");
    box_free(box);
}

static void writes_an_empty_archive(void **state)
{
    struct box *box = box_make(NULL);

    (void)state;
    assert_int_equal(box_close_lid(box), FIRN_OK);
    assert_int_equal(box_give_tar(box, "a.tar"), FIRN_OK);
    run("test $(stat -c %s a.tar) = 1024 && test -z \"$(tar -tf a.tar)\"");
    box_free(box);
}

static int set_up(void **state)
{
    (void)state;
    scratch_make();
    assert_int_equal(chdir(scratch_path("")), 0);
    tree_of_everything("all");
    /* GNU tar and libarchive spell such names differently in pax headers, and neither reads the other */
    assert_int_equal(removexattr("all/noted", "user.a=b% \xC3\xA9"), 0);
    tree_folder("plain", 0750);
    tree_file("plain/early", "early", 5, 0640);
    assert_int_equal(link("plain/early", "plain/hard"), 0);
    assert_int_equal(symlink("early", "plain/link"), 0);
    tree_file("plain/sparse", "", 0, 0644);
    assert_int_equal(truncate("plain/sparse", 3000000), 0);
    if (geteuid() == 0)
        run("chown -hR 0:0 plain");
    tree_time("plain/early", -2, 0);
    tree_time("plain/link", 1234567890, 250000000);
    tree_time("plain/sparse", 8589934592, 1);
    tree_time("plain", 5, 0);
    tree_folder("lossy", 0755);
    tree_pattern("lossy/a", 300000, 11);
    tree_pattern("lossy/m", 4000000, 12);
    tree_file("lossy/z", "last", 4, 0644);
    assert_int_equal(link("lossy/m", "lossy/same as m"), 0);
    tree_folder("folders", 0755);
    tree_folder("folders/inner", 0755);
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
    struct CMUnitTest tests[32];
    size_t count = 0;
#define WHOLE(test) cmocka_unit_test_setup(test, start_afresh)
    static const struct CMUnitTest others[] = {
        WHOLE(tar_restores_it),         WHOLE(tar_lists_it),        WHOLE(comes_back),
        WHOLE(same_items_same_bytes),   WHOLE(keeps_what_is_left),  WHOLE(leaves_out_what_is_lost),
        WHOLE(refuses_evil),            WHOLE(tells_of_full_media), WHOLE(tells_of_broken_pipes),
        WHOLE(lives_without_memory),    WHOLE(counts_folders_once), WHOLE(writes_an_empty_archive),
    };

    for (size_t i = 0; i < COUNT(choice_cases); i++)
        tests[count++] = (struct CMUnitTest){ .name = choice_cases[i].what, .test_func = chooses,
                                              .setup_func = start_afresh,
                                              .initial_state = (void *)(uintptr_t)&choice_cases[i] };
    for (size_t i = 0; i < COUNT(others); i++)
        tests[count++] = others[i];
    return _cmocka_run_group_tests("tar", tests, count, set_up, tear_down);
}
