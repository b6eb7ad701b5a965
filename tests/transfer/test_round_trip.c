/* tests/transfer/test_round_trip.c - one of everything goes in and comes out as it was */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "transfer/box.h"
#include "transfer/tree.h"

#include "help/scratch.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <cmocka.h>

#include <stdlib.h>
#include <unistd.h>

static void everything(void **state)
{
    struct box *box = box_make(NULL);

    (void)state;
    assert_int_equal(box_take_path(box, "all"), FIRN_OK);
    assert_string_equal(box->notes, "");
    assert_int_equal(box_close_lid(box), FIRN_OK);
    box->outlet.owner = FIRN_OUTLET_OWNER_NAMES;
    box->outlet.devices = true;
    assert_int_equal(box_give_folder(box, "out"), FIRN_OK);
    assert_string_equal(box->notes, "");
    assert_int_equal(box->given.written, box->taken.items);
    assert_int_equal(tree_differences("all", "out/all", 0), 0);
    box_free(box);
}

/* The comparison that all this rests on sees what it should. */
static const struct change_case { const char *what, *command; unsigned may_differ, differences; } change_cases[] = {
    { "nothing", "true", 0, 0 },
    { "a byte", "printf j | dd of=same/all/sub/hello.txt conv=notrunc status=none; touch -r all/sub/hello.txt "
                "same/all/sub/hello.txt", 0, 1 },
    { "a mode", "chmod 600 same/all/sub/hello.txt", 0, 1 },
    { "a mode that may differ", "chmod 600 same/all/sub/hello.txt", TREE_ANY_MODE, 0 },
    { "a time by a nanosecond", "touch -d '2009-02-13 23:31:30.987654322 UTC' same/all/sub/hello.txt", 0, 1 },
    { "a name", "rm same/all/sub/hello.txt; touch -r all/sub same/all/sub", 0, 2 },      /* and how many there are */
    { "a link", "ln -sfn elsewhere same/all/link; touch -hr all/link same/all/link", 0, 4 },
    { "a hard link", "cp -p same/all/sub/large x && mv x same/all/sub/large; touch -r all/sub same/all/sub", 0, 3 },
    { "an attribute", "setfattr -n user.two -v 3 'same/all/plainly noted'", 0, 1 },
    { "a hole", "printf '\\0' | dd of=same/all/sparse bs=1 seek=5000000 conv=notrunc status=none; touch -r all/sparse "
                "same/all/sparse", 0, 1 },
};

static void sees_changes(void **state)
{
    const struct change_case *c = *state;

    assert_int_equal(system("rm -rf same && mkdir same && cp -a all same/all"), 0);
    assert_int_equal(system(c->command), 0);
    assert_int_equal(tree_differences("all", "same/all", c->may_differ), c->differences);
}

static int set_up(void **state)
{
    (void)state;
    scratch_make();
    if (chdir(scratch_path("")) != 0)
        return -1;
    tree_of_everything("all");
    return 0;
}

static int tear_down(void **state)
{
    (void)state;
    scratch_remove();
    return 0;
}

int main(void)
{
    enum { CHANGES = sizeof change_cases / sizeof change_cases[0] };
    struct CMUnitTest tests[CHANGES + 1];

    for (size_t i = 0; i < CHANGES; i++)
        tests[i] = (struct CMUnitTest){ .name = change_cases[i].what, .test_func = sees_changes,
                                        .initial_state = (void *)(uintptr_t)&change_cases[i] };
    tests[CHANGES] = (struct CMUnitTest)cmocka_unit_test(everything);
    return cmocka_run_group_tests(tests, set_up, tear_down);
}
