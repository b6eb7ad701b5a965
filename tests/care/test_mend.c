/*
 * tests/care/test_mend.c - the mend journal: its bytes, every power cut, every fault on the way
 *
 * Journals are built and read here from format-spec/mend.md with libxxhash alone, not with the code under test.
 * SPDX-License-Identifier: BSD-2-Clause
 */
#include "care/mend.h"

#include "base/bytes.h"
#include "care/journal_memory.h"
#include "care/mend_file.h"
#include "guard/vectors.h"
#include "help/fault_memory.h"
#include "help/scratch.h"

#include <errno.h>
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/stat.h>
#include <unistd.h>
#include <xxhash.h>

#include <cmocka.h>

enum {
    DATA = 16, RESERVE = 8, BLOCKS = 120,      /* five full sheets of { 8, 4, 2 } */
    FILE_BYTES = (BLOCKS + 1) * FIRN_BLOCK_BYTES,
    HEAD = 48
};

static const uint8_t id[8] = { 0x00, 0x11, 0x22, 0x33, 0x44, 0x55, 0x66, 0x77 };
static const uint8_t other_id[8] = { 0x00, 0x11, 0x22, 0x33, 0x44, 0x55, 0x66, 0x78 };

static uint8_t good[FILE_BYTES], bad[FILE_BYTES];
static bool damaged[BLOCKS + 1];      /* by page: the title page, then the blocks */
static unsigned damaged_pages;

/* One machine: a container and its journal on one supply. */
struct bench {
    struct fault_power power;
    struct fault_store container;
    struct journal_memory journal;
    struct firn_mend_subject subject;
};

static void seal_block(uint8_t *block, uint64_t number, const uint8_t *whose)
{
    bool reserve = number % (DATA + RESERVE) >= DATA;
    struct firn_block_tag tag = {
        .version = FIRN_BLOCK_FORMAT_VERSION, .kind = reserve ? FIRN_BLOCK_RESERVE : FIRN_BLOCK_DATA,
        .geometry = { 8, 4, 2 }, .number = number, .data_blocks = DATA
    };

    memcpy(tag.id, whose, sizeof tag.id);
    for (size_t i = 0; i < FIRN_BLOCK_PAYLOAD_BYTES; i++)
        block[i] = (uint8_t)(number * 31 + i * 7 + i / 253);
    firn_block_seal(block, &tag);
}

/* A sound container, and one with lone pages, runs and the title page damaged. */
static int make_containers(void **state)
{
    uint64_t random = 7;

    (void)state;
    scratch_make();
    memset(good, 't', FIRN_BLOCK_BYTES);
    for (uint64_t n = 0; n < BLOCKS; n++)
        seal_block(good + (n + 1) * FIRN_BLOCK_BYTES, n, id);
    memcpy(bad, good, sizeof bad);
    for (unsigned page = 0; page <= BLOCKS; page++) {
        damaged[page] = page == 0 || page == 3 || (page >= 20 && page < 26) || (page >= 40 && page < 110)
                     || page == BLOCKS;
        for (unsigned i = 0; damaged[page] && i < FIRN_BLOCK_BYTES; i++)
            bad[page * FIRN_BLOCK_BYTES + i] ^= (uint8_t)fault_random(&random);
        damaged_pages += damaged[page];
    }
    return 0;
}

static int tidy(void **state)
{
    (void)state;
    scratch_remove();
    return 0;
}

static void bench_make(struct bench *bench, const uint8_t *bytes, size_t count)
{
    *bench = (struct bench){ .power = { 0 } };
    fault_store_make(&bench->container, bytes, count);
    bench->container.power = &bench->power;
    journal_memory_make(&bench->journal, &bench->power);
    bench->subject = (struct firn_mend_subject){ &bench->container.store, &bench->journal.place, firn_memory_system() };
}

static void bench_free(struct bench *bench)
{
    fault_store_free(&bench->container);
    journal_memory_free(&bench->journal);
}

static bool holds(const struct bench *bench, const uint8_t *bytes, size_t count)
{
    return bench->container.now.used == count && memcmp(bench->container.now.bytes, bytes, count) == 0;
}

/* The whole repair, as scrub does it. */
static enum firn_status repair(struct bench *bench, struct firn_mend_outcome *outcome, struct firn_fault *fault)
{
    struct firn_mend *mend;
    enum firn_status status = firn_mend_begin(&bench->subject, id, fault, &mend);

    *outcome = (struct firn_mend_outcome){ 0 };
    for (uint64_t page = 0; page <= BLOCKS && status == FIRN_OK; page++)
        if (damaged[page])
            status = firn_mend_add(mend, page * FIRN_BLOCK_BYTES, good + page * FIRN_BLOCK_BYTES, fault);
    if (status == FIRN_OK)
        status = firn_mend_finish(mend, outcome, fault);
    firn_mend_free(mend);
    return status;
}

/* What a repair makes of the damaged container, or of its first bytes only. */
static const uint8_t *repaired_from(size_t bytes)
{
    static uint8_t repaired[FILE_BYTES];

    memset(repaired, 0, sizeof repaired);
    memcpy(repaired, bad, bytes);
    for (unsigned page = 0; page <= BLOCKS; page++)
        if (damaged[page])
            memcpy(repaired + page * FIRN_BLOCK_BYTES, good + page * FIRN_BLOCK_BYTES, FIRN_BLOCK_BYTES);
    return repaired;
}

static void repairs(void **state)
{
    struct firn_mend_outcome outcome;
    struct firn_fault fault = { 0 };
    struct bench bench;

    (void)state;
    bench_make(&bench, bad, FILE_BYTES);
    assert_int_equal(repair(&bench, &outcome, &fault), FIRN_OK);
    assert_int_equal(outcome.written, damaged_pages);
    assert_int_equal(outcome.refused, 0);
    assert_true(holds(&bench, good, FILE_BYTES));
    assert_false(bench.journal.there || bench.journal.there_on_medium);
    bench_free(&bench);

    bench_make(&bench, bad, 50 * FIRN_BLOCK_BYTES + 100);      /* cut short in the midst of a block: it grows */
    assert_int_equal(repair(&bench, &outcome, &fault), FIRN_OK);
    assert_true(holds(&bench, repaired_from(50 * FIRN_BLOCK_BYTES + 100), FILE_BYTES));
    bench_free(&bench);
}

/* --- the bytes of a journal --- */

static void xxh3(const uint8_t *bytes, size_t count, uint8_t hash[16])
{
    XXH128_hash_t value = XXH3_128bits(bytes, count);

    firn_bytes_put64(hash, value.low64);
    firn_bytes_put64(hash + 8, value.high64);
}

struct draft { uint8_t *bytes; size_t used, hash_at; uint64_t entries; };

static void draft_start(struct draft *draft, uint32_t version, const uint8_t *whose, uint64_t size)
{
    *draft = (struct draft){ .bytes = calloc(1, 4 * FILE_BYTES), .used = HEAD, .hash_at = 32 };
    assert_non_null(draft->bytes);
    memcpy(draft->bytes, "FIRNMEND", 8);
    firn_bytes_put32(draft->bytes + 8, version);
    memcpy(draft->bytes + 16, whose, 8);
    firn_bytes_put64(draft->bytes + 24, size);
    xxh3(draft->bytes, 32, draft->bytes + 32);
}

static void draft_piece(struct draft *draft, uint64_t word, const uint8_t *bytes, size_t count)
{
    uint8_t *at = draft->bytes + draft->used;

    firn_bytes_put64(at, word);
    firn_bytes_put32(at + 8, (uint32_t)count);
    if (count > 0)
        memcpy(at + 16, bytes, count);
    draft->used += 16 + count;
    xxh3(draft->bytes + draft->hash_at, draft->used - draft->hash_at, draft->bytes + draft->used);
    draft->hash_at = draft->used;
    draft->used += 16;
    draft->entries++;
}

/* What is written is what the specification says: runs joined, 64 blocks at most, each hash over what came before. */
static void writes_what_is_specified(void **state)
{
    struct firn_mend_outcome outcome;
    struct firn_fault fault;
    struct draft draft;
    struct bench bench;

    (void)state;
    draft_start(&draft, 1, id, FILE_BYTES);
    draft_piece(&draft, 0, good, FIRN_BLOCK_BYTES);
    draft_piece(&draft, 3 * 4096, good + 3 * 4096, 4096);
    draft_piece(&draft, 20 * 4096, good + 20 * 4096, 6 * 4096);
    draft_piece(&draft, 40 * 4096, good + 40 * 4096, 64 * 4096);
    draft_piece(&draft, 104 * 4096, good + 104 * 4096, 6 * 4096);
    draft_piece(&draft, 120 * 4096, good + 120 * 4096, 4096);
    draft_piece(&draft, draft.entries, NULL, 0);

    bench_make(&bench, bad, FILE_BYTES);
    bench.container.rules[FAULT_SYNC] = (struct fault_rule){ .from = 1, .times = 1 };      /* the journal stays */
    assert_int_equal(repair(&bench, &outcome, &fault), FIRN_IO);
    assert_true(bench.journal.there_on_medium);
    assert_int_equal(bench.journal.file.kept.used, draft.used);
    assert_memory_equal(bench.journal.file.kept.bytes, draft.bytes, draft.used);
    bench_free(&bench);
    free(draft.bytes);
}

/* The worked example of the specification: a journal without entries. */
static void agrees_with_the_worked_example(void **state)
{
    struct firn_mend_outcome outcome;
    struct firn_fault fault;
    struct firn_mend *mend;
    uint8_t wanted[256];
    struct bench bench;
    size_t count = vectors_read("mend.txt", "journal-id-0011223344556677-size-4096000-no-entries", wanted,
                                sizeof wanted);

    (void)state;
    assert_int_equal(count, 80);
    bench_make(&bench, NULL, 0);
    assert_int_equal(bench.container.store.resize(&bench.container, 4096000, &(int){ 0 }), FIRN_OK);
    bench.container.rules[FAULT_SYNC] = (struct fault_rule){ .from = 1, .times = 1 };
    assert_int_equal(firn_mend_begin(&bench.subject, id, &fault, &mend), FIRN_OK);
    assert_int_equal(firn_mend_finish(mend, &outcome, &fault), FIRN_IO);
    firn_mend_free(mend);
    assert_int_equal(bench.journal.file.kept.used, count);
    assert_memory_equal(bench.journal.file.kept.bytes, wanted, count);
    bench_free(&bench);
}

/* --- power cuts --- */

static const uint64_t seeds[] = { 0, UINT64_MAX, 1, 2, 3 };
enum { SEEDS = sizeof seeds / sizeof seeds[0] };

static void power_back(struct bench *bench, uint64_t seed)
{
    fault_store_power_back(&bench->container, seed);
    journal_memory_power_back(&bench->journal, seed + 1000);
    bench->power = (struct fault_power){ 0 };
}

/* Every sector is as it was or as it should be. */
static void expect_no_worse(const struct bench *bench, size_t bytes_before)
{
    const struct fault_picture *now = &bench->container.now;

    assert_true(now->used >= bytes_before);
    for (size_t at = 0; at < bytes_before; at += FAULT_SECTOR_BYTES) {
        size_t count = bytes_before - at < FAULT_SECTOR_BYTES ? bytes_before - at : FAULT_SECTOR_BYTES;

        assert_true(memcmp(now->bytes + at, bad + at, count) == 0 || memcmp(now->bytes + at, good + at, count) == 0);
    }
}

/* A cut during a repair, and another after `second` steps of what follows (0: none): then all is well or as before. */
static bool survive(size_t bytes, uint64_t first, uint64_t second, uint64_t seed, bool *as_before)
{
    struct firn_mend_outcome outcome;
    struct firn_fault fault;
    enum firn_mend_state state;
    struct bench bench;
    bool was_cut;

    bench_make(&bench, bad, bytes);
    bench.power.cut_after = first;
    (void)repair(&bench, &outcome, &fault);
    was_cut = bench.power.off;
    power_back(&bench, seed);
    expect_no_worse(&bench, bytes);
    if (second > 0) {
        bench.power.cut_after = second;
        (void)firn_mend_resume(&bench.subject, id, &state, &outcome, &fault);
        was_cut = bench.power.off;
        power_back(&bench, seed * 3);
        expect_no_worse(&bench, bytes);
    }
    assert_int_equal(firn_mend_resume(&bench.subject, id, &state, &outcome, &fault), FIRN_OK);
    assert_false(bench.journal.there || bench.journal.there_on_medium);
    *as_before = holds(&bench, bad, bytes);
    assert_true(*as_before || holds(&bench, repaired_from(bytes), FILE_BYTES));
    bench_free(&bench);
    return was_cut;
}

static void survives_power_cuts_of(size_t bytes)
{
    unsigned before = 0, after = 0;
    uint64_t cuts = 0;
    bool as_before, was_cut = true;

    for (uint64_t first = 1; was_cut; first++, cuts++)
        for (unsigned seed = 0; seed < SEEDS; seed++) {
            bool again = true;

            was_cut = survive(bytes, first, 0, seeds[seed], &as_before);
            before += as_before;
            after += !as_before;
            for (uint64_t second = 1; was_cut && again; second++)
                again = survive(bytes, first, second, seeds[seed], &as_before);
        }
    assert_true(cuts > 15);      /* make, head, 6 entries, seal, sync, settle, 6 writes, sync, remove, its sync */
    assert_true(before > 3 * SEEDS && after > 3 * SEEDS);
}

static void survives_every_power_cut(void **state)
{
    (void)state;
    survives_power_cuts_of(FILE_BYTES);
}

static void survives_every_power_cut_while_growing(void **state)
{
    (void)state;
    survives_power_cuts_of(50 * FIRN_BLOCK_BYTES + 100);
}

/* --- what may be found in the journal's place --- */

enum plan {
    EMPTY, ZEROS, HALF_A_MAGIC, HALF_A_HEAD, NO_SEAL, TEXT, SHORT_TEXT, VERSION_2, ANOTHERS, FINE, FINE_AND_A_BYTE,
    WRONG_COUNT, DAMAGED_BLOCK, ELSEWHERE, ASKEW, FAR_AWAY, ODD_LENGTH, TOO_LONG, OF_ANOTHER, TITLE_ONLY, NO_ENTRIES
};

static const struct found_case { const char *name; enum plan plan; enum firn_mend_state state; } found_cases[] = {
    { "found: an empty file", EMPTY, FIRN_MEND_UNSEALED },
    { "found: zeros, as a power cut may leave them", ZEROS, FIRN_MEND_UNSEALED },
    { "found: the first bytes of a journal", HALF_A_MAGIC, FIRN_MEND_UNSEALED },
    { "found: half a head", HALF_A_HEAD, FIRN_MEND_UNSEALED },
    { "found: no seal", NO_SEAL, FIRN_MEND_UNSEALED },
    { "found: somebody's letter", TEXT, FIRN_MEND_STRANGE },
    { "found: somebody's note", SHORT_TEXT, FIRN_MEND_STRANGE },
    { "found: a later version", VERSION_2, FIRN_MEND_STRANGE },
    { "found: sealed, of another container", ANOTHERS, FIRN_MEND_OTHER },
    { "found: sealed", FINE, FIRN_MEND_SEALED },
    { "found: something behind the seal", FINE_AND_A_BYTE, FIRN_MEND_UNSEALED },
    { "found: a seal that counts wrongly", WRONG_COUNT, FIRN_MEND_UNSEALED },
    { "found: sealed, but a block is damaged", DAMAGED_BLOCK, FIRN_MEND_STRANGE },
    { "found: sealed, but a block belongs elsewhere", ELSEWHERE, FIRN_MEND_STRANGE },
    { "found: sealed, but a place is no block's", ASKEW, FIRN_MEND_STRANGE },
    { "found: sealed, but a place is beyond all files", FAR_AWAY, FIRN_MEND_STRANGE },
    { "found: an entry of no whole blocks", ODD_LENGTH, FIRN_MEND_UNSEALED },
    { "found: an entry longer than entries are", TOO_LONG, FIRN_MEND_UNSEALED },
    { "found: sealed, but a block is another container's", OF_ANOTHER, FIRN_MEND_STRANGE },
    { "found: sealed, the title page only", TITLE_ONLY, FIRN_MEND_SEALED },
    { "found: sealed, nothing to do", NO_ENTRIES, FIRN_MEND_SEALED },
};

static void draft_found(struct draft *draft, enum plan plan)
{
    static uint8_t foreign[FIRN_BLOCK_BYTES];
    const uint8_t *block = good + 4 * 4096;
    uint64_t place = 4 * 4096;
    size_t count = 4096;

    draft_start(draft, plan == VERSION_2 ? 2 : 1, plan == ANOTHERS ? other_id : id, FILE_BYTES);
    seal_block(foreign, 3, other_id);
    switch (plan) {
    case DAMAGED_BLOCK: block = bad + 3 * 4096, place = 3 * 4096; break;
    case ELSEWHERE:     place = 5 * 4096; break;
    case ASKEW:         place += 1; break;
    case FAR_AWAY:      place = UINT64_MAX - 4095; break;
    case ODD_LENGTH:    count = 4095; break;
    case TOO_LONG:      count = 65 * 4096; break;
    case OF_ANOTHER:
    case ANOTHERS:      block = foreign; break;
    case TITLE_ONLY:    block = good, place = 0; break;
    default:            break;
    }
    if (plan != TITLE_ONLY && plan != NO_ENTRIES && plan != ANOTHERS)
        draft_piece(draft, 20 * 4096, good + 20 * 4096, 3 * 4096);
    if (plan != NO_ENTRIES)
        draft_piece(draft, place, block, count);
    if (plan != NO_SEAL)
        draft_piece(draft, draft->entries + (plan == WRONG_COUNT), NULL, 0);
    switch (plan) {
    case EMPTY:           draft->used = 0; break;
    case ZEROS:           memset(draft->bytes, 0, draft->used); break;
    case HALF_A_MAGIC:    draft->used = 5; break;
    case HALF_A_HEAD:     draft->used = 30; break;
    case TEXT:            memset(draft->bytes, 'x', draft->used); break;
    case SHORT_TEXT:      memcpy(draft->bytes, "milk", 4), draft->used = 4; break;
    case FINE_AND_A_BYTE: draft->bytes[draft->used++] = 0; break;
    default:              break;
    }
}

static void deals_with_what_it_finds(void **state)
{
    const struct found_case *c = *state;
    bool stays = c->state == FIRN_MEND_STRANGE || c->state == FIRN_MEND_OTHER;
    struct firn_mend_outcome outcome;
    struct firn_fault fault = { 0 };
    enum firn_mend_state found;
    struct draft draft;
    struct bench bench;

    bench_make(&bench, bad, FILE_BYTES);
    draft_found(&draft, c->plan);
    journal_memory_plant(&bench.journal, draft.bytes, draft.used);
    assert_int_equal(firn_mend_look(&bench.subject, id, &found, &fault), FIRN_OK);
    assert_int_equal(found, c->state);
    assert_true(bench.journal.there && holds(&bench, bad, FILE_BYTES));

    assert_int_equal(firn_mend_resume(&bench.subject, id, &found, &outcome, &fault), stays ? FIRN_BAD_DATA : FIRN_OK);
    assert_int_equal(found, c->state);
    assert_int_equal(bench.journal.there, stays);
    if (stays) {
        assert_memory_equal(bench.journal.file.now.bytes, draft.bytes, draft.used);
        assert_non_null(strstr(fault.what, "journal"));
    }
    if (c->state != FIRN_MEND_SEALED || c->plan == NO_ENTRIES)
        assert_true(holds(&bench, bad, FILE_BYTES));
    else
        assert_int_equal(outcome.written, c->plan == FINE ? 4 : 1);
    if (c->plan == FINE)
        assert_memory_equal(bench.container.now.bytes + 20 * 4096, good + 20 * 4096, 3 * 4096);
    free(draft.bytes);
    bench_free(&bench);
}

/* However much of a journal was written, and whichever of its bits is wrong: without a right seal it has no effect. */
static void believes_only_the_seal(void **state)
{
    struct firn_mend_outcome outcome;
    struct firn_fault fault;
    enum firn_mend_state found;
    struct draft draft;
    struct bench bench;

    (void)state;
    bench_make(&bench, bad, FILE_BYTES);
    draft_start(&draft, 1, id, FILE_BYTES);
    draft_piece(&draft, 3 * 4096, good + 3 * 4096, 4096);
    draft_piece(&draft, 1, NULL, 0);
    for (size_t used = 0; used < draft.used; used += used > HEAD + 40 && used < HEAD + 4000 ? 97 : 1) {
        journal_memory_plant(&bench.journal, draft.bytes, used);
        assert_int_equal(firn_mend_resume(&bench.subject, id, &found, &outcome, &fault), FIRN_OK);
        assert_int_equal(found, FIRN_MEND_UNSEALED);
    }
    for (size_t bit = 0; bit < 8 * draft.used; bit += bit > 8 * (HEAD + 40) && bit < 8 * (HEAD + 4000) ? 97 : 1) {
        draft.bytes[bit / 8] ^= (uint8_t)(1U << bit % 8);
        journal_memory_plant(&bench.journal, draft.bytes, draft.used);
        (void)firn_mend_resume(&bench.subject, id, &found, &outcome, &fault);
        assert_int_equal(found, bit < 64 ? FIRN_MEND_STRANGE : FIRN_MEND_UNSEALED);
        draft.bytes[bit / 8] ^= (uint8_t)(1U << bit % 8);
    }
    assert_true(holds(&bench, bad, FILE_BYTES));
    assert_int_equal(bench.container.calls[FAULT_WRITE], 0);
    free(draft.bytes);
    bench_free(&bench);
}

/* --- faults on the way --- */

static void leaves_the_container_alone_when_the_journal_fails(void **state)
{
    struct firn_mend_outcome outcome;
    struct firn_fault fault;
    struct bench bench;

    (void)state;
    bench_make(&bench, bad, FILE_BYTES);
    for (uint64_t nth = 1; nth <= 9; nth++) {      /* head, 6 entries, seal; the ninth is the sync */
        struct fault_rule rule = { .from = nth < 9 ? nth : 1, .times = 1, .os_error = ENOSPC, .halfway = true };

        memset(bench.journal.rules, 0, sizeof bench.journal.rules);
        bench.journal.rules[nth < 9 ? FAULT_WRITE : FAULT_SYNC] = rule;
        fault = (struct firn_fault){ 0 };
        assert_int_equal(repair(&bench, &outcome, &fault), FIRN_IO);
        assert_int_equal(fault.os_error, ENOSPC);
        assert_string_equal(fault.what, "journal");
        assert_false(bench.journal.there);
    }
    memset(bench.journal.rules, 0, sizeof bench.journal.rules);
    bench.journal.settle_fails = FIRN_IO;
    bench.journal.remove_fails = FIRN_IO;
    assert_int_equal(repair(&bench, &outcome, &fault), FIRN_IO);
    bench.journal.settle_fails = bench.journal.remove_fails = FIRN_OK;
    assert_int_equal(repair(&bench, &outcome, &fault), FIRN_EXISTS);      /* in its way */
    bench.journal.there = false;
    bench.journal.make_fails = FIRN_CANNOT_CREATE;
    assert_int_equal(repair(&bench, &outcome, &fault), FIRN_CANNOT_CREATE);
    assert_int_equal(bench.container.calls[FAULT_WRITE], 0);
    assert_true(holds(&bench, bad, FILE_BYTES));
    bench_free(&bench);
}

static void writes_no_block_that_is_not_sound(void **state)
{
    struct firn_mend_outcome outcome;
    struct firn_fault fault;
    struct firn_mend *mend;
    struct bench bench;

    (void)state;
    bench_make(&bench, good, FILE_BYTES);
    assert_int_equal(firn_mend_begin(&bench.subject, id, &fault, &mend), FIRN_OK);
    assert_int_equal(firn_mend_add(mend, 5 * 4096, good + 5 * 4096, &fault), FIRN_OK);
    assert_int_equal(firn_mend_add(mend, 3 * 4096, bad + 3 * 4096, &fault), FIRN_OK);
    assert_int_equal(firn_mend_finish(mend, &outcome, &fault), FIRN_BAD_DATA);
    firn_mend_free(mend);
    assert_false(bench.journal.there);
    assert_int_equal(bench.container.calls[FAULT_WRITE], 0);
    bench_free(&bench);
}

/* A medium with places that take nothing: the rest is repaired all the same, and the report says how much was not. */
static void tells_what_the_medium_does_not_take(void **state)
{
    struct firn_mend_outcome outcome;
    struct firn_fault fault;
    struct bench bench;

    (void)state;
    bench_make(&bench, bad, FILE_BYTES);
    bench.container.ranges[0] = (struct fault_range){ 22 * 4096 + 512, 4096, true, false };      /* pages 22 and 23 */
    bench.container.range_count = 1;
    assert_int_equal(repair(&bench, &outcome, &fault), FIRN_OK);
    assert_int_equal(outcome.refused, 2);
    assert_int_equal(outcome.written, damaged_pages - 2);
    assert_int_equal(outcome.os_error, EIO);
    assert_int_equal(outcome.refused_at, 22 * 4096);
    assert_false(bench.journal.there);
    assert_memory_equal(bench.container.now.bytes + 24 * 4096, good + 24 * 4096, FILE_BYTES - 24 * 4096);
    bench_free(&bench);

    bench_make(&bench, bad, FILE_BYTES);
    bench.container.ranges[0] = (struct fault_range){ 50 * 4096, 1, false, true };      /* it lies about a byte */
    bench.container.range_count = 1;
    bench.container.now.bytes[50 * 4096] = (uint8_t)~good[50 * 4096];
    assert_int_equal(repair(&bench, &outcome, &fault), FIRN_OK);
    assert_int_equal(outcome.refused, 1);
    assert_int_equal(outcome.os_error, 0);
    assert_int_equal(outcome.refused_at, 50 * 4096);
    assert_false(bench.journal.there);
    bench_free(&bench);

    bench_make(&bench, bad, 100 * 4096);
    bench.container.room_bytes = 100 * 4096;      /* and a full one */
    assert_int_equal(repair(&bench, &outcome, &fault), FIRN_OK);
    assert_int_equal(outcome.os_error, ENOSPC);
    assert_int_equal(outcome.refused, 11);
    assert_true(holds(&bench, good, 100 * 4096));
    bench_free(&bench);
}

static void keeps_the_journal_when_the_container_cannot_be_synced(void **state)
{
    struct firn_mend_outcome outcome;
    struct firn_fault fault;
    enum firn_mend_state found;
    struct bench bench;

    (void)state;
    bench_make(&bench, bad, FILE_BYTES);
    bench.container.rules[FAULT_SYNC] = (struct fault_rule){ .from = 1, .times = 2 };
    assert_int_equal(repair(&bench, &outcome, &fault), FIRN_IO);
    assert_true(bench.journal.there_on_medium);
    power_back(&bench, 0);
    assert_true(holds(&bench, bad, FILE_BYTES));
    assert_int_equal(firn_mend_resume(&bench.subject, id, &found, &outcome, &fault), FIRN_IO);
    assert_true(bench.journal.there_on_medium);
    assert_int_equal(firn_mend_resume(&bench.subject, id, &found, &outcome, &fault), FIRN_OK);
    assert_int_equal(found, FIRN_MEND_SEALED);
    assert_int_equal(outcome.written, damaged_pages);
    assert_true(holds(&bench, good, FILE_BYTES));
    assert_false(bench.journal.there);
    bench_free(&bench);
}

static void tells_a_journal_that_cannot_be_read_or_removed(void **state)
{
    struct firn_mend_outcome outcome;
    struct firn_fault fault;
    enum firn_mend_state found;
    struct draft draft;
    struct bench bench;

    (void)state;
    bench_make(&bench, bad, FILE_BYTES);
    draft_found(&draft, FINE);
    for (uint64_t nth = 1; nth <= 6; nth++) {
        journal_memory_plant(&bench.journal, draft.bytes, draft.used);
        bench.journal.file.rules[FAULT_READ] = (struct fault_rule){ .from = nth, .times = 1, .halfway = nth % 2 == 0 };
        assert_int_equal(firn_mend_resume(&bench.subject, id, &found, &outcome, &fault), FIRN_IO);
        assert_true(bench.journal.there);
        assert_int_equal(bench.container.calls[FAULT_WRITE], 0);
    }
    bench.journal.open_fails = FIRN_BAD_DATA;      /* a link in its place, say */
    assert_int_equal(firn_mend_resume(&bench.subject, id, &found, &outcome, &fault), FIRN_BAD_DATA);
    assert_int_equal(found, FIRN_MEND_STRANGE);
    bench.journal.open_fails = FIRN_IO;
    assert_int_equal(firn_mend_resume(&bench.subject, id, &found, &outcome, &fault), FIRN_IO);
    bench.journal.open_fails = FIRN_OK;
    bench.journal.remove_fails = FIRN_IO;
    journal_memory_plant(&bench.journal, draft.bytes, draft.used);
    assert_int_equal(firn_mend_resume(&bench.subject, id, &found, &outcome, &fault), FIRN_IO);
    assert_memory_equal(bench.container.now.bytes + 20 * 4096, good + 20 * 4096, 3 * 4096);
    free(draft.bytes);
    bench_free(&bench);
}

/* --- memory that runs out --- */

static void leaves_all_alone_when_memory_is_out(void **state)
{
    struct firn_mend_outcome outcome;
    struct firn_fault fault;
    enum firn_mend_state found;
    struct bench bench;
    struct fault_memory scarce;

    (void)state;
    bench_make(&bench, bad, FILE_BYTES);
    bench.subject.memory = &scarce.memory;
    for (unsigned nth = 1; nth <= 2; nth++) {
        fault_memory_make(&scarce, nth);
        assert_int_equal(repair(&bench, &outcome, &fault), FIRN_NO_MEMORY);
        assert_false(bench.journal.there);
    }
    fault_memory_make(&scarce, 1);
    assert_int_equal(firn_mend_resume(&bench.subject, id, &found, &outcome, &fault), FIRN_NO_MEMORY);
    fault_memory_make(&scarce, 1);
    assert_int_equal(firn_mend_look(&bench.subject, id, &found, &fault), FIRN_NO_MEMORY);
    assert_true(holds(&bench, bad, FILE_BYTES));
    fault_memory_make(&scarce, 3);
    assert_int_equal(repair(&bench, &outcome, &fault), FIRN_OK);
    assert_int_equal(scarce.outstanding, 0);
    bench_free(&bench);
}

/* --- real files --- */

static void lies_beside_its_container(void **state)
{
    const struct firn_memory *memory = firn_memory_system();
    struct firn_mend_outcome outcome;
    struct firn_mend_file *file;
    struct firn_store container;
    struct firn_fault fault = { 0 };
    struct firn_mend *mend;
    enum firn_mend_state found;
    struct stat facts;
    size_t count;
    uint8_t *bytes;

    (void)state;
    scratch_write("core.firn", bad, FILE_BYTES, 0644);
    assert_int_equal(symlink("core.firn", scratch_path("alias")), 0);
    assert_int_equal(firn_store_open(scratch_path("alias"), FIRN_STORE_MEND, memory, &container, &fault), FIRN_OK);
    assert_int_equal(firn_mend_file_make(scratch_path("alias"), &container, memory, &file, &fault), FIRN_OK);
    {
        struct firn_mend_subject subject = { &container, &file->place, memory };

        assert_int_equal(firn_mend_resume(&subject, id, &found, &outcome, &fault), FIRN_OK);
        assert_int_equal(found, FIRN_MEND_NONE);
        assert_int_equal(firn_mend_begin(&subject, id, &fault, &mend), FIRN_OK);
        assert_int_equal(stat(scratch_path("core.firn.mend"), &facts), 0);      /* where the link leads to */
        assert_int_equal(facts.st_mode & 07777, 0600);
        for (uint64_t page = 0; page <= BLOCKS; page++)
            if (damaged[page])
                assert_int_equal(firn_mend_add(mend, page * 4096, good + page * 4096, &fault), FIRN_OK);
        assert_int_equal(firn_mend_finish(mend, &outcome, &fault), FIRN_OK);
        firn_mend_free(mend);
        assert_int_equal(access(scratch_path("core.firn.mend"), F_OK), -1);

        assert_int_equal(symlink("core.firn", scratch_path("core.firn.mend")), 0);
        assert_int_equal(firn_mend_resume(&subject, id, &found, &outcome, &fault), FIRN_BAD_DATA);
        assert_int_equal(found, FIRN_MEND_STRANGE);
        assert_int_equal(firn_mend_begin(&subject, id, &fault, &mend), FIRN_EXISTS);
    }
    firn_mend_file_free(file);
    container.close(container.self);
    bytes = scratch_read("core.firn", &count);
    assert_int_equal(count, FILE_BYTES);
    assert_memory_equal(bytes, good, FILE_BYTES);
    free(bytes);
}


int main(void)
{
    static const struct CMUnitTest singles[] = {
        cmocka_unit_test(repairs), cmocka_unit_test(writes_what_is_specified),
        cmocka_unit_test(agrees_with_the_worked_example), cmocka_unit_test(survives_every_power_cut),
        cmocka_unit_test(survives_every_power_cut_while_growing), cmocka_unit_test(believes_only_the_seal),
        cmocka_unit_test(leaves_the_container_alone_when_the_journal_fails),
        cmocka_unit_test(writes_no_block_that_is_not_sound), cmocka_unit_test(tells_what_the_medium_does_not_take),
        cmocka_unit_test(keeps_the_journal_when_the_container_cannot_be_synced),
        cmocka_unit_test(tells_a_journal_that_cannot_be_read_or_removed),
        cmocka_unit_test(leaves_all_alone_when_memory_is_out), cmocka_unit_test(lies_beside_its_container),
    };
    enum { SINGLES = sizeof singles / sizeof singles[0], FOUND = sizeof found_cases / sizeof found_cases[0] };
    struct CMUnitTest tests[SINGLES + FOUND];

    memcpy(tests, singles, sizeof singles);
    for (size_t i = 0; i < FOUND; i++)
        tests[SINGLES + i] = (struct CMUnitTest){ found_cases[i].name, deals_with_what_it_finds, NULL, NULL,
                                                  (void *)(uintptr_t)&found_cases[i] };
    return cmocka_run_group_tests_name("mend", tests, make_containers, tidy);
}
