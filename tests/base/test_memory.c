/* tests/base/test_memory.c - the allocator and growing arrays */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "base/memory.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <cmocka.h>

#include <stdint.h>

static void blocks_are_aligned(void **state)
{
    const struct firn_memory *memory = firn_memory_system();

    for (size_t size = 1; size < 10000; size = size * 3 + 1) {
        void *block = memory->get(memory->self, size);

        assert_non_null(block);
        assert_true((uintptr_t)block % 64 == 0);
        memory->put(memory->self, block);
    }
    assert_null(memory->get(memory->self, 0));
    memory->put(memory->self, NULL);
    (void)state;
}

static void products_do_not_overflow(void **state)
{
    const struct firn_memory *memory = firn_memory_system();
    uint8_t *zeros = firn_memory_get_zeroed(memory, 7, 11);

    assert_null(firn_memory_get_zeroed(memory, SIZE_MAX / 2, 3));
    assert_null(firn_memory_get_zeroed(memory, 0, 3));
    for (size_t i = 0; i < 77; i++)
        assert_int_equal(zeros[i], 0);
    memory->put(memory->self, zeros);
    (void)state;
}

static void arrays_grow_and_keep_what_they_hold(void **state)
{
    const struct firn_memory *memory = firn_memory_system();
    void *array = NULL;
    size_t capacity = 0;

    for (size_t i = 0; i < 5000; i++) {
        assert_int_equal(firn_memory_grow(memory, &array, &capacity, i + 1, sizeof(size_t)), FIRN_OK);
        assert_true(capacity > i);
        ((size_t *)array)[i] = i * i;
    }
    for (size_t i = 0; i < 5000; i++)
        assert_int_equal(((size_t *)array)[i], i * i);
    assert_int_equal(firn_memory_grow(memory, &array, &capacity, SIZE_MAX / 2, 16), FIRN_NO_MEMORY);
    assert_int_equal(((size_t *)array)[4999], (size_t)4999 * 4999);
    memory->put(memory->self, array);
    (void)state;
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(blocks_are_aligned), cmocka_unit_test(products_do_not_overflow),
        cmocka_unit_test(arrays_grow_and_keep_what_they_hold),
    };

    return cmocka_run_group_tests_name("memory", tests, NULL, NULL);
}
