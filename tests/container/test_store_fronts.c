/*
 * tests/container/test_store_fronts.c - stores in front of stores: one that reads again, one that puts blocks in order
 *
 * SPDX-License-Identifier: BSD-2-Clause
 */
#include "firn/block.h"
#include "firn/store.h"

#include "guard/random.h"
#include "help/collection.h"
#include "help/fault_memory.h"

#include <errno.h>
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdlib.h>
#include <string.h>

#include <cmocka.h>

static const struct firn_sheet_geometry geometry = { .k = 14, .m = 4, .depth = 8 };
static struct collection *packed;      /* never changed */
static struct random dice;

/* Counts what is handed out of a store, and whether it is what was packed. */
struct reading {
    unsigned items, whole, wrong;
    struct firn_reader_layout layout;
    struct firn_reader_damage damage;
};

static enum firn_status take_bytes(void *self, const struct firn_item *item, uint64_t at, const uint8_t *bytes,
                                   size_t count)
{
    struct reading *reading = self;

    for (size_t i = 0; i < count; i++)
        reading->wrong += bytes[i] != collection_byte(packed->seed, item->number, at + i);
    return FIRN_OK;
}

static enum firn_status take_end(void *self, const struct firn_item *item, const struct firn_reader_outcome *outcome)
{
    struct reading *reading = self;

    (void)item;
    reading->items++;
    reading->whole += outcome->lost_bytes == 0;
    return FIRN_OK;
}

static enum firn_status read_all(struct firn_store *store, struct reading *reading)
{
    struct firn_reader_options options = { .store = store, .memory = firn_memory_system(), .threads = 1 };
    struct firn_reader_visitor visitor = { .self = reading, .bytes = take_bytes, .end = take_end };
    struct firn_reader_walk_report walked;
    struct firn_reader *reader;
    struct firn_fault fault;
    enum firn_status status = firn_reader_open(&options, &fault, &reader);

    *reading = (struct reading){ 0 };
    if (status != FIRN_OK)
        return status;
    reading->layout = *firn_reader_layout_of(reader);
    status = firn_reader_walk(reader, &visitor, &fault, &walked);
    firn_reader_damage_so_far(reader, &reading->damage);
    firn_reader_free(reader);
    return status;
}

/* --- patience --- */

/* A medium on which some blocks cannot be read, or read wrong, the first so many times. */
struct moody {
    const uint8_t *bytes;
    size_t used;
    unsigned *tries;                   /* of each block */
    unsigned bad_every;                /* pages n with n % bad_every == 1 are bad */
    unsigned fails_for, flips_for;     /* they fail so often, then have so often ... */
    unsigned flips;                    /* ... so many bits flipped, others each time */
};

static enum firn_status moody_read(void *self, uint64_t at, void *bytes, size_t count, size_t *got, int *os_error)
{
    struct moody *moody = self;
    size_t left = at < moody->used ? moody->used - (size_t)at : 0;

    *os_error = 0;
    *got = 0;
    count = count < left ? count : left;
    for (size_t done = 0; done < count;) {
        uint64_t page = (at + done) / 4096;
        size_t step = 4096 - (size_t)((at + done) % 4096);
        uint8_t *to = (uint8_t *)bytes + done;

        step = step < count - done ? step : count - done;
        memcpy(to, moody->bytes + at + done, step);
        if (page % moody->bad_every == 1) {
            unsigned tried = moody->tries[page]++;

            if (tried < moody->fails_for) {
                *os_error = EIO;
                return FIRN_IO;
            }
            if (tried < moody->fails_for + moody->flips_for)
                for (unsigned i = 0; i < moody->flips; i++)
                    to[random_below(&dice, (unsigned)step)] ^= (uint8_t)(1U << random_below(&dice, 8));
        }
        done += step;
        *got = done;
    }
    return FIRN_OK;
}

static enum firn_status moody_size(void *self, uint64_t *bytes, int *os_error)
{
    *bytes = ((struct moody *)self)->used;
    *os_error = 0;
    return FIRN_OK;
}

static void moody_forget(void *self, uint64_t at, uint64_t bytes)
{
    (void)self, (void)at, (void)bytes;
}

/* Every third block is bad: beyond the reserve, so that only patience helps. */
static void patience_pays(void **state)
{
    static const struct { unsigned fails_for, flips_for, flips, readings; bool whole; } cases[] = {
        { 0, 1000, 3000, 0, false },     /* without patience nearly all is lost */
        { 0, 2, 3000, 3, true },         /* the third reading is right; layout and stream read some twice already */
        { 0, 1000000, 60, 9, true },     /* none is ever right; the majority of ten is */
        { 3, 0, 0, 5, true },            /* it cannot be read at first */
        { 2, 1000000, 60, 9, true },     /* nor right afterwards */
        { 100000, 0, 0, 5, false },
    };

    (void)state;
    for (size_t i = 0; i < sizeof cases / sizeof cases[0]; i++) {
        struct moody moody = {
            .bytes = packed->buffer.bytes, .used = packed->buffer.used, .bad_every = 3, .fails_for = cases[i].fails_for,
            .flips_for = cases[i].flips_for, .flips = cases[i].flips,
            .tries = calloc(packed->buffer.used / 4096 + 1, sizeof(unsigned))
        };
        struct firn_store inner = { .self = &moody, .read_at = moody_read, .size = moody_size, .forget = moody_forget };
        struct firn_store store;
        struct reading reading;

        assert_non_null(moody.tries);
        assert_int_equal(firn_store_patient(&inner, cases[i].readings, firn_memory_system(), &store), FIRN_OK);
        assert_int_equal(read_all(&store, &reading), FIRN_OK);
        assert_int_equal(reading.wrong, 0);
        if (cases[i].whole) {
            assert_int_equal(reading.whole, packed->items);
            assert_int_equal(reading.damage.lost + reading.damage.rebuilt, 0);
            assert_in_range(firn_store_patient_gained(&store), packed->totals.blocks / 4,
                            packed->totals.blocks / 3 + 1);
        } else {
            assert_true(reading.whole < packed->items);
            assert_int_equal(firn_store_patient_gained(&store), 0);
        }
        store.close(store.self);
        free(moody.tries);
    }
}

/* What the lanes can mend is not hidden: a scrub shall hear of it. */
static void patience_leaves_lanes_their_work(void **state)
{
    struct firn_store_buffer buffer = packed->buffer;
    struct firn_store inner, store;
    struct reading reading;

    (void)state;
    buffer.bytes = malloc(buffer.used);
    assert_non_null(buffer.bytes);
    memcpy(buffer.bytes, packed->buffer.bytes, buffer.used);
    buffer.bytes[7 * 4096 + 100] ^= 1;
    firn_store_memory(&buffer, &inner);
    assert_int_equal(firn_store_patient(&inner, 5, firn_memory_system(), &store), FIRN_OK);
    assert_int_equal(read_all(&store, &reading), FIRN_OK);
    assert_int_equal(reading.damage.mended, 1);
    assert_int_equal(firn_store_patient_gained(&store), 0);
    store.close(store.self);
    free(buffer.bytes);
}

/* --- order --- */

/* A file made of the pieces packed[cuts[2i] .. cuts[2i+1]), garbage of so many bytes before each. */
struct pieces { size_t count; struct { size_t garbage, from, to; } piece[6]; };

static struct firn_store_buffer assemble(const struct pieces *pieces)
{
    struct firn_store_buffer buffer = { malloc(packed->buffer.used + 100000), packed->buffer.used + 100000, 0 };

    assert_non_null(buffer.bytes);
    for (size_t i = 0; i < pieces->count; i++) {
        size_t length = pieces->piece[i].to - pieces->piece[i].from;

        random_fill(&dice, buffer.bytes + buffer.used, pieces->piece[i].garbage);
        buffer.used += pieces->piece[i].garbage;
        memcpy(buffer.bytes + buffer.used, packed->buffer.bytes + pieces->piece[i].from, length);
        buffer.used += length;
    }
    return buffer;
}

static void blocks_are_put_in_order(void **state)
{
    size_t end = packed->buffer.used, a = 100 * 4096 + 1000, b = 170 * 4096;
    const struct { struct pieces pieces; uint64_t stretches; } cases[] = {
        { { 1, { { 0, 5000, end } } }, 1 },                            /* the head is missing */
        { { 1, { { 0, 5 * 4096, end } } }, 1 },                        /* a whole number of blocks of it */
        { { 1, { { 12345, 0, end } } }, 1 },                           /* it lies behind something */
        { { 2, { { 0, 0, a }, { 17, a, end } } }, 2 },                 /* bytes were put in */
        { { 2, { { 0, 0, b }, { 3 * 4096, b, end } } }, 2 },           /* whole blocks were */
        { { 2, { { 0, 0, a }, { 0, a + 2222, end } } }, 2 },           /* bytes were lost */
        { { 2, { { 0, 0, b }, { 0, b + 4 * 4096, end } } }, 2 },       /* whole blocks were */
        { { 3, { { 99, 3000, a }, { 0, a + 1, b }, { 5, b, end - 1 } } }, 3 },
    };

    (void)state;
    for (size_t i = 0; i < sizeof cases / sizeof cases[0]; i++) {
        struct firn_store_buffer buffer = assemble(&cases[i].pieces);
        struct firn_store inner, store;
        struct reading reading;
        struct firn_fault fault;
        uint64_t stretches = 0;
        uint8_t byte = 0;
        int why = 0;

        firn_store_memory(&buffer, &inner);
        assert_int_equal(firn_store_realign(&inner, NULL, firn_memory_system(), &store, &stretches, &fault), FIRN_OK);
        assert_int_equal(stretches, cases[i].stretches);
        assert_int_equal(read_all(&store, &reading), FIRN_OK);
        assert_int_equal(reading.wrong, 0);
        assert_int_equal(reading.whole, packed->items);
        assert_int_equal(reading.layout.blocks, packed->totals.blocks);
        assert_true(reading.layout.colophon_found);
        assert_in_range(reading.damage.rebuilt, 0, 7);      /* what lies across a cut */
        assert_int_equal(store.write_at(store.self, 4096, &byte, 1, &why), FIRN_READ_ONLY);
        store.close(store.self);
        free(buffer.bytes);
    }
}

/* Any read, of any length at any place, gives what the aligned file has there. */
static void any_read_gives_the_same(void **state)
{
    size_t end = packed->buffer.used, a = 90 * 4096, b = 200 * 4096 + 4000;
    struct pieces pieces = { 3, { { 777, 0, a }, { 1, a, b }, { 9000, b, end } } };
    struct firn_store_buffer buffer = assemble(&pieces);
    struct firn_store inner, store;
    struct firn_fault fault;
    uint64_t stretches, size = 0;
    uint8_t *bytes = malloc(end);
    int why;

    (void)state;
    assert_non_null(bytes);
    firn_store_memory(&buffer, &inner);
    assert_int_equal(firn_store_realign(&inner, NULL, firn_memory_system(), &store, &stretches, &fault), FIRN_OK);
    assert_int_equal(store.size(store.self, &size, &why), FIRN_OK);
    assert_int_equal(size, end);
    for (unsigned round = 0; round < 300; round++) {
        size_t at = random_below(&dice, (unsigned)end), count = random_below(&dice, 60000), got;

        count = count < end - at ? count : end - at;
        assert_int_equal(store.read_at(store.self, at, bytes, count, &got, &why), FIRN_OK);
        assert_int_equal(got, count);
        for (size_t i = 0; i < count; i++)      /* the block across the cut at b cannot be had */
            if ((at + i) / 4096 != 200)
                assert_int_equal(bytes[i], packed->buffer.bytes[at + i]);
    }
    store.close(store.self);
    free(bytes);
    free(buffer.bytes);
}

/* A block whose number would make the file absurdly long is passed over, however right its hash is. */
static void absurd_numbers_are_left_alone(void **state)
{
    static const uint64_t numbers[] = { UINT64_C(144) << 50, UINT64_C(144) << 30, UINT64_C(5) << 21 };
    size_t end = packed->buffer.used;

    (void)state;
    for (size_t i = 0; i < sizeof numbers / sizeof numbers[0]; i++) {
        struct pieces pieces = { 1, { { 4096, 5000, end } } };
        struct firn_store_buffer buffer = assemble(&pieces);
        struct firn_block_tag tag = {
            .version = FIRN_BLOCK_FORMAT_VERSION, .kind = FIRN_BLOCK_DATA, .geometry = geometry, .data_blocks = 112,
            .number = numbers[i]
        };
        struct firn_store inner, store;
        struct firn_fault fault;
        uint64_t stretches, size = 0;
        int why;

        if (i == 2) {      /* a small number, but of sheets of five blocks */
            tag.geometry = (struct firn_sheet_geometry){ 1, 4, 1 };
            tag.data_blocks = 1;
        }
        memcpy(tag.id, packed->totals.id, sizeof tag.id);
        firn_block_seal(buffer.bytes, &tag);
        firn_store_memory(&buffer, &inner);
        assert_int_equal(firn_store_realign(&inner, NULL, firn_memory_system(), &store, &stretches, &fault), FIRN_OK);
        assert_int_equal(stretches, 1);
        assert_int_equal(store.size(store.self, &size, &why), FIRN_OK);
        assert_int_equal(size, end);
        store.close(store.self);
        free(buffer.bytes);
    }
}

static bool stop_at_once(void *self)
{
    (void)self;
    return true;
}

static void order_is_left_alone(void **state)
{
    struct firn_store_watch watch = { .stop = stop_at_once };
    struct firn_store_buffer buffer = packed->buffer, garbage = { calloc(1, 50000), 50000, 50000 };
    struct firn_store inner, store;
    struct firn_fault fault;
    uint64_t stretches;

    (void)state;
    assert_non_null(garbage.bytes);
    firn_store_memory(&buffer, &inner);
    assert_int_equal(firn_store_realign(&inner, NULL, firn_memory_system(), &store, &stretches, &fault), FIRN_END);
    assert_int_equal(firn_store_realign(&inner, &watch, firn_memory_system(), &store, &stretches, &fault),
                     FIRN_STOPPED);
    firn_store_memory(&garbage, &inner);
    assert_int_equal(firn_store_realign(&inner, NULL, firn_memory_system(), &store, &stretches, &fault), FIRN_END);
    for (unsigned fail_at = 1; fail_at <= 4; fail_at++) {
        struct fault_memory fault_memory;
        enum firn_status status;

        fault_memory_make(&fault_memory, fail_at);
        buffer.used = packed->buffer.used;
        buffer.bytes = packed->buffer.bytes + 4096;
        buffer.used -= 4096;
        firn_store_memory(&buffer, &inner);
        status = firn_store_realign(&inner, NULL, &fault_memory.memory, &store, &stretches, &fault);
        assert_int_equal(status, FIRN_NO_MEMORY);
        assert_int_equal(fault_memory.outstanding, 0);
    }
    free(garbage.bytes);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(patience_pays),
        cmocka_unit_test(patience_leaves_lanes_their_work),
        cmocka_unit_test(blocks_are_put_in_order),
        cmocka_unit_test(any_read_gives_the_same),
        cmocka_unit_test(absurd_numbers_are_left_alone),
        cmocka_unit_test(order_is_left_alone),
    };
    int failed;

    dice = random_start("test_store_fronts");
    packed = collection_make(30, 1931, &geometry, 1);
    failed = cmocka_run_group_tests_name("container: stores in front of stores", tests, NULL, NULL);
    collection_free(packed);
    return failed;
}
