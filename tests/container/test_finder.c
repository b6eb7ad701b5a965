/*
 * tests/container/test_finder.c - blocks in garbage, at any byte, damaged ones among them
 *
 * SPDX-License-Identifier: BSD-2-Clause
 */
#include "container/finder.h"

#include "guard/random.h"
#include "help/fault_memory.h"
#include "help/fault_store.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdlib.h>
#include <string.h>

#include <cmocka.h>

enum { BYTES = FIRN_BLOCK_BYTES, ROOM = 12 << 20, FOUND_MAX = 4000 };

static struct random dice;

struct scene {
    uint8_t *bytes;
    size_t used;
    struct fault_range unreadable;
    /* what was found */
    struct { uint64_t at, number; enum firn_block_state state; uint8_t id; bool page; } found[FOUND_MAX];
    unsigned count, wrong;
    struct firn_finder_report report;
    unsigned stop_after;
};

static void scene_make(struct scene *scene)
{
    memset(scene, 0, sizeof *scene);
    scene->bytes = malloc(ROOM);
    assert_non_null(scene->bytes);
}

static void add_garbage(struct scene *scene, size_t count)
{
    assert_true(scene->used + count <= ROOM);
    random_fill(&dice, scene->bytes + scene->used, count);
    scene->used += count;
}

/* A block of the container whose id begins with `id`; k = 14, m = 4, D = 8, every sheet full. */
static uint8_t *add_block(struct scene *scene, uint8_t id, uint64_t number)
{
    struct firn_block_tag tag = {
        .version = FIRN_BLOCK_FORMAT_VERSION, .geometry = { 14, 4, 8 }, .id = { id, (uint8_t)(id * 7), 3, 200, id, 9 },
        .number = number, .data_blocks = 112
    };
    uint8_t *block = scene->bytes + scene->used;

    add_garbage(scene, BYTES);
    tag.kind = number % 144 < 112 ? FIRN_BLOCK_DATA : FIRN_BLOCK_RESERVE;
    firn_block_seal(block, &tag);
    return block;
}

static void spoil_block(uint8_t *block, unsigned flips)
{
    for (unsigned i = 0; i < flips; i++) {
        unsigned bit = random_below(&dice, 8 * BYTES);

        block[bit / 8] ^= (uint8_t)(1U << bit % 8);
    }
    block[40] ^= 3;      /* two words of one lane, so that no luck with the rest helps */
    block[40 + 8] ^= 3;
    block[40 + 16] ^= 3;
    block[40 + 800] ^= 3;
}

static enum firn_status note_block(void *self, const struct firn_finder_block *block)
{
    struct scene *scene = self;

    assert_true(scene->count < FOUND_MAX);
    scene->found[scene->count].at = block->at;
    scene->found[scene->count].number = block->tag.number;
    scene->found[scene->count].state = block->state;
    scene->found[scene->count].id = block->tag.id[0];
    scene->found[scene->count].page = block->page != NULL;
    scene->count++;
    if (block->state == FIRN_BLOCK_SOUND)
        scene->wrong += memcmp(block->bytes, scene->bytes + block->at, BYTES) != 0;
    if (block->page != NULL)
        scene->wrong += memcmp(block->page, scene->bytes + block->at - BYTES, BYTES) != 0;
    return FIRN_OK;
}

static bool stop_then(void *self)
{
    struct scene *scene = self;

    return scene->stop_after > 0 && scene->count >= scene->stop_after;
}

static enum firn_status look_with(struct scene *scene, const struct firn_memory *memory)
{
    struct firn_finder_visitor visitor = { .self = scene, .block = note_block, .stop = stop_then };
    struct fault_store store;
    struct firn_fault fault;
    enum firn_status status;

    scene->count = 0;
    fault_store_make(&store, scene->bytes, scene->used);
    if (scene->unreadable.bytes > 0)
        store.ranges[store.range_count++] = scene->unreadable;
    status = firn_finder_run(&store.store, memory, &visitor, &scene->report, &fault);
    fault_store_free(&store);
    return status;
}

static void look(struct scene *scene)
{
    assert_int_equal(look_with(scene, firn_memory_system()), FIRN_OK);
    assert_int_equal(scene->wrong, 0);
}

/* What was told of block `number` of container `id`. */
static int state_of(const struct scene *scene, uint8_t id, uint64_t number)
{
    for (unsigned i = 0; i < scene->count; i++)
        if (scene->found[i].id == id && scene->found[i].number == number)
            return (int)scene->found[i].state;
    return -1;
}

static void nothing_in_garbage(void **state)
{
    struct scene scene;

    (void)state;
    for (size_t bytes = 0; bytes < 9000; bytes += bytes < 4090 ? 1363 : 1) {
        scene_make(&scene);
        add_garbage(&scene, bytes);
        for (size_t i = 0; i + 4 < bytes; i += 4)      /* nothing but the magic of tags */
            memcpy(scene.bytes + i, "FIRN", 4);
        look(&scene);
        assert_int_equal(scene.count, 0);
        assert_int_equal(scene.report.bytes, bytes);
        free(scene.bytes);
        bytes = bytes < 4090 ? bytes : bytes + 577;
    }
}

/* Rows of blocks with garbage of odd lengths between them, across several fillings of the window. */
static void blocks_at_odd_places(void **state)
{
    uint64_t number = 0, first_at[16];
    struct scene scene;
    unsigned rows;

    (void)state;
    scene_make(&scene);
    for (rows = 0; scene.used + 3 * 1048576 < ROOM && rows < 16; rows++) {
        add_garbage(&scene, 1 + random_below(&dice, 700000));
        first_at[rows] = scene.used;
        for (unsigned i = 0; i < 100; i++)
            add_block(&scene, 1, number++);
    }
    add_garbage(&scene, random_below(&dice, 5000));
    look(&scene);
    assert_int_equal(scene.count, 100 * rows);
    for (unsigned i = 0; i < scene.count; i++) {
        assert_int_equal(scene.found[i].number, i);
        assert_int_equal(scene.found[i].at, first_at[i / 100] + i % 100 * BYTES);
    }
    assert_int_equal(scene.report.good, scene.count);
    free(scene.bytes);
}

/* A damaged block in a row is known by its place and nearly by its tag, even when its magic is gone. */
static void damaged_blocks_are_known_by_their_neighbours(void **state)
{
    struct scene scene;

    (void)state;
    scene_make(&scene);
    add_garbage(&scene, 12345);
    for (unsigned i = 0; i < 60; i++) {
        uint8_t *block = add_block(&scene, 1, i);

        if (i % 3 == 0)
            spoil_block(block, 60);
        if (i % 6 == 0)
            block[FIRN_BLOCK_TAG_AT] ^= 16;
        if (i == 31)
            block[FIRN_BLOCK_TAG_AT + 2] ^= 1;      /* the lanes mend this one */
        if (i == 40)
            memset(block, 0, BYTES);                /* nothing is left of it */
    }
    look(&scene);
    for (unsigned i = 0; i < 60; i++)
        assert_int_equal(state_of(&scene, 1, i), i == 40       ? -1
                                                 : i % 3 == 0  ? FIRN_BLOCK_GONE
                                                 : i == 31     ? FIRN_BLOCK_MENDED
                                                               : FIRN_BLOCK_SOUND);
    assert_int_equal(scene.count, 59);
    free(scene.bytes);
}

/* No block is intact: two tags that are whole and fit together begin the row. */
static void rows_without_a_good_block(void **state)
{
    struct scene scene;
    unsigned known = 0;

    (void)state;
    scene_make(&scene);
    add_garbage(&scene, 333);
    for (unsigned i = 0; i < 200; i++)
        spoil_block(add_block(&scene, 1, i), 33);      /* a thousandth of all bits */
    look(&scene);
    for (unsigned i = 0; i < 200; i++)
        known += state_of(&scene, 1, i) == FIRN_BLOCK_GONE;
    assert_int_equal(known, 200);
    assert_int_equal(scene.count, 200);
    free(scene.bytes);
}

static void bytes_inserted_and_lost(void **state)
{
    struct scene scene;

    (void)state;
    scene_make(&scene);
    for (unsigned i = 0; i < 30; i++)
        add_block(&scene, 1, i);
    add_garbage(&scene, 17);
    for (unsigned i = 30; i < 60; i++)
        add_block(&scene, 1, i);
    scene.used -= 100;      /* block 59 lacks its end */
    for (unsigned i = 60; i < 90; i++)
        add_block(&scene, 1, i);
    look(&scene);
    for (unsigned i = 0; i < 90; i++)
        if (i != 59)
            assert_int_equal(state_of(&scene, 1, i), FIRN_BLOCK_SOUND);
    assert_int_equal(scene.report.good, 89);
    free(scene.bytes);
}

/* Two containers, their rows mingled: each block is told with the id it has. */
static void containers_are_told_apart(void **state)
{
    struct scene scene;

    (void)state;
    scene_make(&scene);
    for (unsigned i = 0; i < 40; i++) {
        add_block(&scene, 1, 2 * i);
        add_block(&scene, 1, 2 * i + 1);
        add_garbage(&scene, i * 11 % 29);
        add_block(&scene, 2, 1000 + i);
    }
    look(&scene);
    for (unsigned i = 0; i < 80; i++)
        assert_int_equal(state_of(&scene, 1, i), FIRN_BLOCK_SOUND);
    for (unsigned i = 0; i < 40; i++)
        assert_int_equal(state_of(&scene, 2, 1000 + i), FIRN_BLOCK_SOUND);
    assert_int_equal(scene.count, 120);
    free(scene.bytes);
}

/* What cannot be read costs the blocks that it touches, and no other. */
static void unreadable_stretches_are_passed_over(void **state)
{
    struct scene scene;

    (void)state;
    scene_make(&scene);
    add_garbage(&scene, 100);
    for (unsigned i = 0; i < 200; i++)
        add_block(&scene, 1, i);
    scene.unreadable = (struct fault_range){ .at = 100 + 50 * BYTES, .bytes = 10 * BYTES };
    look(&scene);
    assert_in_range(scene.report.unreadable_bytes, 10 * BYTES, 11 * BYTES);
    for (unsigned i = 0; i < 200; i++)
        if (i < 49 || i > 60)
            assert_int_equal(state_of(&scene, 1, i), FIRN_BLOCK_SOUND);
        else if (i > 50 && i < 60)
            assert_int_equal(state_of(&scene, 1, i), -1);
    free(scene.bytes);
}

static void the_page_before_block_0(void **state)
{
    struct scene scene;

    (void)state;
    scene_make(&scene);
    add_garbage(&scene, 777);
    add_block(&scene, 1, 0);
    add_block(&scene, 1, 1);
    look(&scene);
    assert_false(scene.found[0].page);      /* there are 777 bytes only */
    add_garbage(&scene, 5000);
    add_block(&scene, 1, 0);
    look(&scene);
    assert_true(scene.found[2].page);
    free(scene.bytes);
}

static void stops_and_lives_without_memory(void **state)
{
    struct fault_memory fault;
    struct scene scene;

    (void)state;
    scene_make(&scene);
    for (unsigned i = 0; i < 50; i++)
        add_block(&scene, 1, i);
    scene.stop_after = 7;
    assert_int_equal(look_with(&scene, firn_memory_system()), FIRN_STOPPED);
    assert_int_equal(scene.count, 7);
    fault_memory_make(&fault, 1);
    assert_int_equal(look_with(&scene, &fault.memory), FIRN_NO_MEMORY);
    assert_int_equal(fault.outstanding, 0);
    free(scene.bytes);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(nothing_in_garbage),
        cmocka_unit_test(blocks_at_odd_places),
        cmocka_unit_test(damaged_blocks_are_known_by_their_neighbours),
        cmocka_unit_test(rows_without_a_good_block),
        cmocka_unit_test(bytes_inserted_and_lost),
        cmocka_unit_test(containers_are_told_apart),
        cmocka_unit_test(unreadable_stretches_are_passed_over),
        cmocka_unit_test(the_page_before_block_0),
        cmocka_unit_test(stops_and_lives_without_memory),
    };

    dice = random_start("test_finder");
    return cmocka_run_group_tests_name("container: blocks found anywhere", tests, NULL, NULL);
}
