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
    const struct CMUnitTest tests[] = { cmocka_unit_test(everything) };

    return cmocka_run_group_tests(tests, set_up, tear_down);
}
