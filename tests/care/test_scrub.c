/*
 * tests/care/test_scrub.c - scrub of containers damaged here, by code that shares nothing with what repairs them
 *
 * What it has to come to is the container as it was packed, byte for byte; what is beyond repair is counted by hand.
 * SPDX-License-Identifier: BSD-2-Clause
 */
#include "firn/scrub.h"

#include "care/journal_memory.h"
#include "care/scrub_store.h"
#include "guard/random.h"
#include "help/collection.h"
#include "help/fault_memory.h"
#include "help/scratch.h"

#include <errno.h>
#include <setjmp.h>
#include <signal.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/stat.h>
#include <sys/wait.h>
#include <time.h>
#include <unistd.h>

#include <cmocka.h>

/* k = 14, m = 4, 8 rows: sheets of 144 blocks, of which any run of 32 may be lost. */
static const struct firn_sheet_geometry geometry = { .k = 14, .m = 4, .depth = 8 };
enum { SHEET = 144, RUN = 32 };

static struct collection *packed;      /* as it was written; never changed */
static size_t whole_bytes, blocks;
static struct random dice;

static uint64_t place(uint64_t block)
{
    return (block + 1) * 4096;
}

/* --- a container under care --- */

struct ward {
    struct fault_power power;
    struct fault_store container;
    struct journal_memory journal;
    struct firn_scrub_options options;
    struct firn_scrub_report report;
    struct firn_fault fault;
    struct { uint64_t first, count; } lost[64];
    unsigned lost_runs, stops_left;
    uint64_t done, all;
};

static void note_lost(void *self, uint64_t first, uint64_t count)
{
    struct ward *ward = self;

    assert_true(ward->lost_runs < 64);
    ward->lost[ward->lost_runs].first = first;
    ward->lost[ward->lost_runs++].count = count;
}

static void note_progress(void *self, uint64_t done, uint64_t all)
{
    struct ward *ward = self;

    assert_true(done >= ward->done && done <= all);
    ward->done = done;
    ward->all = all;
}

static bool stop_some_time(void *self)
{
    struct ward *ward = self;

    return ward->stops_left > 0 && --ward->stops_left == 0;
}

static void ward_make(struct ward *ward, const uint8_t *bytes, size_t count)
{
    *ward = (struct ward){ .stops_left = 0 };
    fault_store_make(&ward->container, bytes, count);
    ward->container.power = &ward->power;
    journal_memory_make(&ward->journal, &ward->power);
    ward->options = (struct firn_scrub_options){
        .path = "core.firn", .memory = firn_memory_system(), .threads = 1, .self = ward, .stop = stop_some_time,
        .progress = note_progress, .lost = note_lost
    };
}

static void ward_free(struct ward *ward)
{
    fault_store_free(&ward->container);
    journal_memory_free(&ward->journal);
}

static enum firn_status scrub(struct ward *ward)
{
    ward->lost_runs = 0;
    ward->done = ward->all = 0;
    ward->fault = (struct firn_fault){ 0 };
    return firn_scrub_store(&ward->options, &ward->container.store, &ward->journal.place, &ward->report, &ward->fault);
}

static uint8_t *bytes_of(struct ward *ward, uint64_t block)
{
    return ward->container.now.bytes + place(block);
}

/* Damage done by hand is on the medium. */
static void set_down(struct ward *ward)
{
    int why;

    assert_int_equal(ward->container.store.sync(&ward->container, &why), FIRN_OK);
    fault_store_calm(&ward->container);
    ward->power = (struct fault_power){ 0 };
}

static void flip(struct ward *ward, uint64_t block, unsigned bit)
{
    bytes_of(ward, block)[bit / 8] ^= (uint8_t)(1U << bit % 8);
}

static void wipe(struct ward *ward, uint64_t first, uint64_t count)
{
    for (uint64_t i = 0; i < count * 4096; i++)
        bytes_of(ward, first)[i] = (uint8_t)random_next(&dice);
}

static void expect_as_packed(const struct ward *ward)
{
    assert_int_equal(ward->container.now.used, whole_bytes);
    assert_memory_equal(ward->container.now.bytes, packed->buffer.bytes, whole_bytes);
    assert_int_equal(ward->container.kept.used, whole_bytes);
    assert_memory_equal(ward->container.kept.bytes, packed->buffer.bytes, whole_bytes);
    assert_false(ward->journal.there || ward->journal.there_on_medium);
}

static void expect_silence(const struct ward *ward)
{
    const struct firn_scrub_report *r = &ward->report;

    assert_int_equal(r->blocks, blocks);
    assert_int_equal(r->checked, blocks);
    assert_int_equal(r->mended + r->mended_bits + r->rebuilt + r->lost + r->unreadable, 0);
    assert_int_equal(r->written + r->refused + r->replayed + r->extended_bytes + r->foreign_bytes, 0);
    assert_int_equal(r->title, FIRN_SCRUB_TITLE_SOUND);
    assert_int_equal(r->journal, FIRN_SCRUB_JOURNAL_NONE);
    assert_true(r->end_known);
}

/* --- findings --- */

static void is_silent_when_all_is_well(void **state)
{
    struct ward ward;

    (void)state;
    ward_make(&ward, packed->buffer.bytes, whole_bytes);
    for (unsigned report_only = 0; report_only < 2; report_only++) {
        ward.options.report_only = report_only;
        ward.options.threads = 1 + report_only;
        assert_int_equal(scrub(&ward), FIRN_OK);
        expect_silence(&ward);
        assert_memory_equal(ward.report.id, packed->totals.id, 8);
        assert_int_equal(ward.report.file_bytes, whole_bytes);
        assert_int_equal(ward.report.geometry.k, 14);
        assert_int_equal(ward.done, blocks);
        assert_int_equal(ward.all, blocks);
        assert_int_equal(ward.lost_runs, 0);
    }
    assert_int_equal(ward.container.calls[FAULT_WRITE] + ward.power.steps, 0);
    ward_free(&ward);
}

/* Flips in payload, tag, hash and guard words: a bit in each third block, all 64 lanes in some. */
static void mends_stray_bits(void **state)
{
    uint64_t damaged = 0, bits = 0;
    struct ward ward;

    (void)state;
    ward_make(&ward, packed->buffer.bytes, whole_bytes);
    for (uint64_t n = 0; n < blocks; n += 3, damaged++) {
        unsigned run = n % 5 == 0 ? 64 : 1, at = random_below(&dice, 32768 - 64);

        for (unsigned i = 0; i < run; i++, bits++)
            flip(&ward, n, at + i);
    }
    flip(&ward, 1, 32767), damaged++, bits++;      /* the last guard bit of all: no harm done yet */
    set_down(&ward);
    assert_int_equal(scrub(&ward), FIRN_OK);
    assert_int_equal(ward.report.mended, damaged);
    assert_int_equal(ward.report.mended_bits, bits);
    assert_int_equal(ward.report.written, damaged);
    assert_int_equal(ward.report.rebuilt + ward.report.lost + ward.report.unreadable, 0);
    expect_as_packed(&ward);
    assert_int_equal(scrub(&ward), FIRN_OK);
    expect_silence(&ward);
    ward_free(&ward);
}

static void rebuilds_a_run_from_the_reserve(void **state)
{
    struct ward ward;

    (void)state;
    ward_make(&ward, packed->buffer.bytes, whole_bytes);
    for (uint64_t first = 0; first + RUN <= SHEET; first += 7) {      /* and always the end of the second sheet */
        wipe(&ward, first, RUN);
        wipe(&ward, 2 * SHEET - RUN, RUN);
        flip(&ward, SHEET + 5, 77);
        set_down(&ward);
        assert_int_equal(scrub(&ward), FIRN_OK);
        assert_int_equal(ward.report.rebuilt, 2 * RUN);
        assert_int_equal(ward.report.mended, 1);
        assert_int_equal(ward.report.written, 2 * RUN + 1);
        assert_int_equal(ward.report.lost, 0);
        expect_as_packed(&ward);
    }
    ward_free(&ward);
}

/* One block more than a row's reserve: that row is lost, the others are not. The same again in the next scrub. */
static void tells_what_is_lost(void **state)
{
    static uint8_t wiped[4096];
    struct ward ward;

    (void)state;
    ward_make(&ward, packed->buffer.bytes, whole_bytes);
    wipe(&ward, SHEET + 20, RUN + 1);      /* blocks 20, 28, 36, 44 and 52 of the sheet are in one row */
    flip(&ward, SHEET + 60, 5);
    set_down(&ward);
    memcpy(wiped, bytes_of(&ward, SHEET + 36), sizeof wiped);
    for (unsigned again = 0; again < 2; again++) {
        assert_int_equal(scrub(&ward), FIRN_OK);
        assert_int_equal(ward.report.lost, 5);
        assert_int_equal(ward.report.rebuilt, again ? 0 : RUN - 4);
        assert_int_equal(ward.report.mended, again ? 0 : 1);
        assert_int_equal(ward.lost_runs, 5);
        for (unsigned i = 0; i < 5; i++) {
            assert_int_equal(ward.lost[i].first, SHEET + 20 + 8 * i);
            assert_int_equal(ward.lost[i].count, 1);
        }
        assert_memory_equal(bytes_of(&ward, SHEET + 36), wiped, sizeof wiped);      /* left as it was */
    }
    ward_free(&ward);
}

/* --- in parts --- */

struct parts {
    struct ward ward;
    uint64_t begin;                /* what begin_at says */
    unsigned opened;
    uint64_t found[3], next;       /* by kind; no block comes twice or out of order */
};

static uint64_t tell_begin(void *self, const uint8_t id[8], uint64_t all)
{
    struct parts *parts = self;

    assert_memory_equal(id, packed->totals.id, 8);
    assert_int_equal(all, blocks);
    parts->opened++;
    return parts->begin;
}

static void note_found(void *self, uint64_t block, enum firn_scrub_found what)
{
    struct parts *parts = self;

    assert_true(block >= parts->next && block < blocks);
    parts->next = block + 1;
    parts->found[what]++;
}

/* Sheet by sheet in any parts: together they find and repair what one scrub does, and nothing twice. */
static void goes_on_where_it_is_told(void **state)
{
    const uint64_t begins[] = { 0, SHEET, SHEET + 1, 2 * SHEET, 3 * SHEET, blocks };

    (void)state;
    for (size_t i = 0; i < sizeof begins / sizeof begins[0]; i++) {
        uint64_t first = (begins[i] + SHEET - 1) / SHEET * SHEET;      /* of the first sheet that is checked */
        int rebuilt = (first <= SHEET ? 5 : 0) + (first <= 2 * SHEET ? RUN - 4 : 0);
        struct parts parts = { .begin = begins[i] };
        struct ward *ward = &parts.ward;

        ward_make(ward, packed->buffer.bytes, whole_bytes);
        ward->options.self = &parts;
        ward->options.begin_at = tell_begin;
        ward->options.found = note_found;
        flip(ward, 3, 9);
        flip(ward, 2 * SHEET, 9);
        wipe(ward, SHEET + 3, 5);
        wipe(ward, 2 * SHEET + 20, RUN + 1);      /* five of them are lost, as below */
        set_down(ward);
        assert_int_equal(scrub(ward), FIRN_OK);
        assert_int_equal(parts.opened, 1);
        assert_int_equal(ward->report.reached, blocks);
        assert_int_equal(ward->report.checked, first < blocks ? blocks - first : 0);
        assert_int_equal(parts.found[FIRN_SCRUB_MENDED], (first == 0) + (first <= 2 * SHEET));
        assert_int_equal(parts.found[FIRN_SCRUB_REBUILT], rebuilt);
        assert_int_equal(parts.found[FIRN_SCRUB_LOST], first <= 2 * SHEET ? 5 : 0);
        assert_int_equal(parts.found[FIRN_SCRUB_MENDED], ward->report.mended);
        assert_int_equal(parts.found[FIRN_SCRUB_REBUILT], ward->report.rebuilt);
        assert_int_equal(parts.found[FIRN_SCRUB_LOST], ward->report.lost);
        ward_free(ward);
    }
}

/* Stopped after any question: what it says it has reached is where a sheet begins, and has been repaired. */
static void tells_how_far_it_came(void **state)
{
    uint64_t last = 0;

    (void)state;
    for (unsigned stops = 1; last < blocks; stops += 7) {
        struct ward ward;
        enum firn_status status;

        ward_make(&ward, packed->buffer.bytes, whole_bytes);
        for (uint64_t n = 0; n < blocks; n += SHEET)
            flip(&ward, n, 5);
        set_down(&ward);
        ward.stops_left = stops;
        status = scrub(&ward);
        assert_true(status == FIRN_OK || status == FIRN_STOPPED);
        assert_true(ward.report.reached % SHEET == 0 || ward.report.reached == blocks);
        assert_int_equal(ward.report.checked, ward.report.reached);
        assert_true(ward.report.reached >= last);
        last = ward.report.reached;
        assert_memory_equal(ward.container.now.bytes + 4096, packed->buffer.bytes + 4096, last * 4096);
        ward_free(&ward);
    }
}

static void joins_lost_blocks_to_runs(void **state)
{
    struct ward ward;

    (void)state;
    ward_make(&ward, packed->buffer.bytes, whole_bytes);
    wipe(&ward, SHEET - 40, 80);      /* five in every row of both sheets */
    set_down(&ward);
    assert_int_equal(scrub(&ward), FIRN_OK);
    assert_int_equal(ward.report.lost, 80);
    assert_int_equal(ward.report.written, 0);
    assert_int_equal(ward.lost_runs, 1);
    assert_int_equal(ward.lost[0].first, SHEET - 40);
    assert_int_equal(ward.lost[0].count, 80);
    ward_free(&ward);
}

static void heals_the_title_page(void **state)
{
    struct ward ward;

    (void)state;
    ward_make(&ward, packed->buffer.bytes, whole_bytes);
    memset(ward.container.now.bytes, 0, 4096);
    set_down(&ward);
    ward.options.report_only = true;
    assert_int_equal(scrub(&ward), FIRN_OK);
    assert_int_equal(ward.report.title, FIRN_SCRUB_TITLE_DAMAGED);
    ward.options.report_only = false;
    wipe(&ward, 0, 3);      /* its protected copy has to be rebuilt first */
    assert_int_equal(scrub(&ward), FIRN_OK);
    assert_int_equal(ward.report.title, FIRN_SCRUB_TITLE_HEALED);
    assert_int_equal(ward.report.written, 4);
    expect_as_packed(&ward);

    wipe(&ward, 0, RUN + 8);      /* and here it is gone: nobody knows what page 0 should be */
    memset(ward.container.now.bytes, 'x', 4096);
    set_down(&ward);
    assert_int_equal(scrub(&ward), FIRN_OK);
    assert_int_equal(ward.report.title, FIRN_SCRUB_TITLE_UNKNOWN);
    assert_int_equal(ward.container.now.bytes[7], 'x');
    ward_free(&ward);
}

static void grows_what_was_cut_short(void **state)
{
    static const size_t cuts[] = { 1, 100, 4095, 4096, 4097, 10000 };
    struct ward ward;

    (void)state;
    for (size_t i = 0; i < sizeof cuts / sizeof cuts[0]; i++) {
        uint64_t gone = (cuts[i] + 4095) / 4096;

        ward_make(&ward, packed->buffer.bytes, whole_bytes - cuts[i]);
        ward.options.report_only = true;
        assert_int_equal(scrub(&ward), FIRN_OK);
        assert_int_equal(ward.report.rebuilt, gone);
        assert_int_equal(ward.report.unreadable, gone);
        assert_int_equal(ward.report.extended_bytes + ward.power.steps, 0);
        ward.options.report_only = false;
        assert_int_equal(scrub(&ward), FIRN_OK);
        assert_int_equal(ward.report.extended_bytes, cuts[i]);
        assert_int_equal(ward.report.foreign_bytes, 0);
        assert_int_equal(ward.report.written, gone);
        expect_as_packed(&ward);
        ward_free(&ward);
    }
}

static void leaves_what_is_not_its_own(void **state)
{
    struct ward ward;
    int why;

    (void)state;
    ward_make(&ward, packed->buffer.bytes, whole_bytes);
    assert_int_equal(ward.container.store.write_at(&ward.container, whole_bytes, packed->buffer.bytes, 9000, &why),
                     FIRN_OK);
    flip(&ward, 3, 3);
    set_down(&ward);
    assert_int_equal(scrub(&ward), FIRN_OK);
    assert_int_equal(ward.report.foreign_bytes, 9000);
    assert_int_equal(ward.report.written, 1);
    assert_int_equal(ward.container.now.used, whole_bytes + 9000);
    assert_memory_equal(ward.container.now.bytes, packed->buffer.bytes, whole_bytes);
    assert_memory_equal(ward.container.now.bytes + whole_bytes, packed->buffer.bytes, 9000);
    ward_free(&ward);
}

/* Sheets of one data block: the last one is full, and only the colophon can say that nothing came after it. */
static void knows_the_end_of_a_last_sheet_that_is_full(void **state)
{
    const struct firn_sheet_geometry tiny = { .k = 1, .m = 4, .depth = 1 };
    struct collection *small = collection_make(3, 5, &tiny, 1);
    struct ward ward;

    (void)state;
    ward_make(&ward, small->buffer.bytes, small->buffer.used);
    assert_int_equal(scrub(&ward), FIRN_OK);
    assert_true(ward.report.end_known);
    ward_free(&ward);
    ward_make(&ward, small->buffer.bytes, small->buffer.used - 5 * 4096);
    assert_int_equal(scrub(&ward), FIRN_OK);
    assert_false(ward.report.end_known);
    ward_free(&ward);
    collection_free(small);
}

/* Without a reserve lanes are all there is. */
static void mends_what_has_no_reserve(void **state)
{
    const struct firn_sheet_geometry bare = { .k = 16, .m = 0, .depth = 4 };
    struct collection *small = collection_make(30, 5, &bare, 1);
    struct ward ward;

    (void)state;
    ward_make(&ward, small->buffer.bytes, small->buffer.used);
    flip(&ward, 2, 2222);
    wipe(&ward, 9, 2);
    set_down(&ward);
    assert_int_equal(scrub(&ward), FIRN_OK);
    assert_int_equal(ward.report.mended, 1);
    assert_int_equal(ward.report.lost, 2);
    assert_int_equal(ward.lost[0].first, 9);
    assert_memory_equal(bytes_of(&ward, 0), small->buffer.bytes + 4096, 9 * 4096);
    ward_free(&ward);
    collection_free(small);
}

static void only_reports_when_told_so(void **state)
{
    struct firn_scrub_report looked;
    struct ward ward;
    uint8_t *before;

    (void)state;
    ward_make(&ward, packed->buffer.bytes, whole_bytes);
    wipe(&ward, 10, 20);
    for (unsigned i = 0; i < 10; i++)
        flip(&ward, SHEET + 3 * i, random_below(&dice, 32768));
    ward.container.now.bytes[0] ^= 1;
    set_down(&ward);
    before = malloc(whole_bytes);
    assert_non_null(before);
    memcpy(before, ward.container.now.bytes, whole_bytes);
    ward.options.report_only = true;
    assert_int_equal(scrub(&ward), FIRN_OK);
    assert_int_equal(ward.power.steps, 0);
    assert_memory_equal(ward.container.now.bytes, before, whole_bytes);
    looked = ward.report;
    ward.options.report_only = false;
    assert_int_equal(scrub(&ward), FIRN_OK);
    assert_int_equal(looked.mended, ward.report.mended);
    assert_int_equal(looked.mended_bits, 10);
    assert_int_equal(looked.rebuilt, ward.report.rebuilt);
    assert_int_equal(looked.written, 0);
    assert_int_equal(looked.title, FIRN_SCRUB_TITLE_DAMAGED);
    expect_as_packed(&ward);
    free(before);
    ward_free(&ward);
}

static const struct refused_case { const char *name; size_t bytes; enum firn_status status; } refused_cases[] = {
    { "no container: an empty file", 0, FIRN_NOT_CONTAINER },
    { "no container: a page of text", 4096, FIRN_NOT_CONTAINER },
    { "no container: noise", 400000, FIRN_NOT_CONTAINER },
};

static void refuses_what_is_no_container(void **state)
{
    const struct refused_case *c = *state;
    uint8_t *noise = malloc(c->bytes + 1);
    struct ward ward;

    assert_non_null(noise);
    random_fill(&dice, noise, c->bytes);
    ward_make(&ward, noise, c->bytes);
    assert_int_equal(scrub(&ward), c->status);
    assert_string_equal(ward.fault.what, "core.firn");
    assert_int_equal(ward.container.calls[FAULT_WRITE] + ward.power.steps, 0);
    ward_free(&ward);
    free(noise);
}

/* --- faults --- */

/* All kinds of damage that can be repaired, in three sheets and the title page. */
static void damage(struct ward *ward)
{
    wipe(ward, 20, RUN);
    for (unsigned i = 0; i < 12; i++)
        flip(ward, SHEET + 7 * i, random_below(&dice, 32768));
    wipe(ward, 2 * SHEET + 3, 5);
    memset(ward->container.now.bytes + 100, 0xFF, 64);
    set_down(ward);
}

static void checks_on_when_nothing_can_be_written(void **state)
{
    static const struct { enum firn_status make, status; int os_error; bool full; } ways[] = {
        { FIRN_CANNOT_CREATE, FIRN_CANNOT_CREATE, EACCES, false }, { FIRN_OK, FIRN_IO, ENOSPC, true },
    };
    struct ward ward;

    (void)state;
    for (size_t i = 0; i < sizeof ways / sizeof ways[0]; i++) {
        ward_make(&ward, packed->buffer.bytes, whole_bytes);
        damage(&ward);
        wipe(&ward, 3 * SHEET, 40);
        set_down(&ward);
        ward.journal.make_fails = ways[i].make;
        if (ways[i].full)
            ward.journal.rules[FAULT_WRITE] = (struct fault_rule){ .from = 2, .times = 1, .os_error = ENOSPC };
        assert_int_equal(scrub(&ward), ways[i].status);
        assert_int_equal(ward.fault.os_error, ways[i].os_error);
        assert_string_equal(ward.fault.what, "journal");
        assert_int_equal(ward.report.checked, blocks);
        assert_int_equal(ward.report.rebuilt, RUN + 5);
        assert_int_equal(ward.report.lost, 40);
        assert_int_equal(ward.report.written, 0);
        assert_int_equal(ward.report.title, FIRN_SCRUB_TITLE_DAMAGED);
        assert_int_equal(ward.container.calls[FAULT_WRITE], 0);
        ward_free(&ward);
    }
}

static void tells_what_stands_in_the_journals_place(void **state)
{
    struct ward ward;

    (void)state;
    ward_make(&ward, packed->buffer.bytes, whole_bytes);
    damage(&ward);
    journal_memory_plant(&ward.journal, (const uint8_t *)"a letter", 8);
    ward.options.report_only = true;
    assert_int_equal(scrub(&ward), FIRN_OK);
    assert_int_equal(ward.report.journal, FIRN_SCRUB_JOURNAL_STRANGE);
    ward.options.report_only = false;
    assert_int_equal(scrub(&ward), FIRN_BAD_DATA);
    assert_int_equal(ward.report.journal, FIRN_SCRUB_JOURNAL_STRANGE);
    assert_int_equal(ward.report.checked, blocks);
    assert_int_equal(ward.report.written + ward.container.calls[FAULT_WRITE], 0);
    assert_memory_equal(ward.journal.file.now.bytes, "a letter", 8);

    journal_memory_plant(&ward.journal, (const uint8_t *)"FIRNME", 6);
    ward.options.report_only = true;
    assert_int_equal(scrub(&ward), FIRN_OK);
    assert_int_equal(ward.report.journal, FIRN_SCRUB_JOURNAL_WAITS);
    assert_true(ward.journal.there);
    ward.options.report_only = false;
    assert_int_equal(scrub(&ward), FIRN_OK);
    assert_int_equal(ward.report.journal, FIRN_SCRUB_JOURNAL_DROPPED);
    expect_as_packed(&ward);
    ward_free(&ward);
}

/*
 * A repair of the whole last sheet, cut off in the midst of its writing by a power cut that left none of its blocks
 * readable: before the journal is played the container seems to end a sheet earlier.
 */
static void finishes_a_repair_first(void **state)
{
    uint64_t first = blocks - blocks % SHEET;
    struct firn_mend_outcome outcome;
    struct firn_mend *mend;
    struct ward ward;

    (void)state;
    ward_make(&ward, packed->buffer.bytes, whole_bytes);
    wipe(&ward, first, blocks - first);
    set_down(&ward);
    {
        struct firn_mend_subject subject = { &ward.container.store, &ward.journal.place, firn_memory_system() };

        assert_int_equal(firn_mend_begin(&subject, packed->totals.id, &ward.fault, &mend), FIRN_OK);
        for (uint64_t n = first; n < blocks; n++)
            assert_int_equal(firn_mend_add(mend, place(n), packed->buffer.bytes + place(n), &ward.fault), FIRN_OK);
        ward.container.rules[FAULT_SYNC] = (struct fault_rule){ .from = 1, .times = 1 };
        assert_int_equal(firn_mend_finish(mend, &outcome, &ward.fault), FIRN_IO);
        firn_mend_free(mend);
    }
    wipe(&ward, first, blocks - first);
    set_down(&ward);
    ward.options.report_only = true;
    assert_int_equal(scrub(&ward), FIRN_OK);
    assert_int_equal(ward.report.journal, FIRN_SCRUB_JOURNAL_WAITS);
    assert_false(ward.report.end_known);
    assert_int_equal(ward.report.blocks, first);
    ward.options.report_only = false;
    assert_int_equal(scrub(&ward), FIRN_OK);
    assert_int_equal(ward.report.journal, FIRN_SCRUB_JOURNAL_REPLAYED);
    assert_int_equal(ward.report.replayed, blocks - first);
    assert_int_equal(ward.report.written, 0);
    assert_int_equal(ward.report.blocks, blocks);
    assert_true(ward.report.end_known);
    expect_as_packed(&ward);
    ward_free(&ward);
}

static void rebuilds_what_cannot_be_read(void **state)
{
    struct ward ward;

    (void)state;
    ward_make(&ward, packed->buffer.bytes, whole_bytes);
    ward.container.ranges[0] = (struct fault_range){ .at = place(30) + 1000, .bytes = 3 * 4096 };      /* 30 .. 33 */
    ward.container.range_count = 1;
    flip(&ward, 2, 9);
    assert_int_equal(scrub(&ward), FIRN_IO);      /* they take what is written, but do not give it back */
    assert_int_equal(ward.report.rebuilt, 4);
    assert_int_equal(ward.report.unreadable, 4);
    assert_int_equal(ward.report.refused, 4);
    assert_int_equal(ward.report.written, 1);
    assert_int_equal(ward.fault.at, place(30));
    assert_string_equal(ward.fault.what, "core.firn");
    ward.container.range_count = 0;
    assert_int_equal(scrub(&ward), FIRN_OK);
    expect_silence(&ward);
    ward_free(&ward);
}

/* Any one read, write or sync may fail, whole or half-way: the next scrub finds nothing worse, and puts it right. */
static void survives_any_single_failure(void **state)
{
    struct ward ward;

    (void)state;
    for (unsigned deed = 0; deed < FAULT_DEEDS; deed++)
        for (uint64_t nth = 1, calls = 1; nth <= calls; nth += nth < 40 ? 1 : 7) {
            enum firn_status status;

            ward_make(&ward, packed->buffer.bytes, whole_bytes);
            damage(&ward);
            ward.container.rules[deed] = (struct fault_rule){ .from = nth, .times = 1, .halfway = nth % 2 == 0 };
            status = scrub(&ward);
            assert_true(status == FIRN_OK || status == FIRN_IO);
            assert_int_equal(ward.report.lost, 0);
            calls = ward.container.calls[deed];
            fault_store_calm(&ward.container);
            assert_int_equal(scrub(&ward), FIRN_OK);
            expect_as_packed(&ward);
            ward_free(&ward);
        }
}

static void survives_every_power_cut(void **state)
{
    static const uint64_t seeds[] = { 0, UINT64_MAX, 5, 6 };
    unsigned replayed = 0, dropped = 0, none = 0;
    bool was_cut = true;
    struct ward ward;

    (void)state;
    for (uint64_t after = 1; was_cut; after++)
        for (size_t i = 0; i < sizeof seeds / sizeof seeds[0]; i++) {
            ward_make(&ward, packed->buffer.bytes, whole_bytes);
            damage(&ward);
            ward.power.cut_after = after;
            (void)scrub(&ward);
            was_cut = ward.power.off;
            fault_store_power_back(&ward.container, seeds[i]);
            journal_memory_power_back(&ward.journal, seeds[i] + 77);
            ward.power = (struct fault_power){ 0 };

            ward.options.report_only = true;
            assert_int_equal(scrub(&ward), FIRN_OK);
            assert_int_equal(ward.report.lost, 0);
            ward.options.report_only = false;
            assert_int_equal(scrub(&ward), FIRN_OK);
            expect_as_packed(&ward);
            replayed += ward.report.journal == FIRN_SCRUB_JOURNAL_REPLAYED;
            dropped += ward.report.journal == FIRN_SCRUB_JOURNAL_DROPPED;
            none += ward.report.journal == FIRN_SCRUB_JOURNAL_NONE;
            ward_free(&ward);
        }
    assert_true(replayed > 10 && dropped > 10 && none > 10);
}

static void survives_want_of_memory(void **state)
{
    enum firn_status status = FIRN_NO_MEMORY;
    struct fault_memory scarce;
    struct ward ward;

    (void)state;
    for (unsigned nth = 1; status != FIRN_OK; nth++) {
        ward_make(&ward, packed->buffer.bytes, whole_bytes);
        damage(&ward);
        fault_memory_make(&scarce, nth);
        ward.options.memory = &scarce.memory;
        status = scrub(&ward);
        assert_true(status == FIRN_OK || status == FIRN_NO_MEMORY);
        assert_int_equal(scarce.outstanding, 0);
        ward.options.memory = firn_memory_system();
        assert_int_equal(scrub(&ward), FIRN_OK);
        expect_as_packed(&ward);
        ward_free(&ward);
        assert_true(nth < 1000);
    }
}

static void stops_when_asked(void **state)
{
    enum firn_status status = FIRN_STOPPED;
    struct ward ward;
    unsigned asked;

    (void)state;
    for (asked = 1; status != FIRN_OK; asked += asked < 20 ? 1 : 7) {
        ward_make(&ward, packed->buffer.bytes, whole_bytes);
        damage(&ward);
        ward.stops_left = asked;
        status = scrub(&ward);
        assert_true(status == FIRN_OK || status == FIRN_STOPPED);
        assert_false(ward.journal.there);
        assert_int_equal(ward.report.checked < blocks, ward.done < blocks);
        ward.stops_left = 0;
        assert_int_equal(scrub(&ward), FIRN_OK);
        expect_as_packed(&ward);
        ward_free(&ward);
    }
    assert_true(asked > 5);
}

/* --- real files --- */

static void put_damaged(const char *name, mode_t mode)
{
    struct ward ward;

    ward_make(&ward, packed->buffer.bytes, whole_bytes);
    damage(&ward);
    scratch_write(name, ward.container.now.bytes, whole_bytes, mode);
    ward_free(&ward);
}

static enum firn_status scrub_file(const char *name, bool report_only, struct firn_scrub_report *report,
                                   struct firn_fault *fault)
{
    struct firn_scrub_options options = {
        .path = scratch_path(name), .memory = firn_memory_system(), .threads = 2, .report_only = report_only
    };

    *fault = (struct firn_fault){ 0 };
    return firn_scrub(&options, report, fault);
}

static void expect_file_as_packed(const char *name)
{
    size_t count;
    uint8_t *bytes = scratch_read(name, &count);

    assert_int_equal(count, whole_bytes);
    assert_memory_equal(bytes, packed->buffer.bytes, whole_bytes);
    free(bytes);
}

static void scrubs_a_file(void **state)
{
    struct firn_scrub_report report;
    struct firn_fault fault;
    unsigned names;

    (void)state;
    put_damaged("core.firn", 0640);
    names = scratch_entries();
    assert_int_equal(scrub_file("core.firn", false, &report, &fault), FIRN_OK);
    assert_int_equal(report.written, RUN + 12 + 5 + 1);
    expect_file_as_packed("core.firn");
    assert_int_equal(scratch_entries(), names);
    assert_int_equal(scrub_file("core.firn", true, &report, &fault), FIRN_OK);
    assert_int_equal(report.mended + report.rebuilt + report.lost, 0);
    assert_int_equal(scrub_file("none.firn", false, &report, &fault), FIRN_NO_INPUT);
    assert_non_null(strstr(fault.what, "none.firn"));
}

static int scrub_status(void *self)
{
    struct firn_scrub_report report;
    struct firn_fault fault;
    const char *name = self;

    return (int)scrub_file(name, false, &report, &fault);
}

static int scrub_as_nobody(void *self)
{
    struct firn_scrub_report report;
    struct firn_fault fault;
    const char *name = self;
    enum firn_status status;

    if (!scratch_be_nobody())
        return 77;
    status = scrub_file(name, false, &report, &fault);
    if (strstr(fault.what, name) == NULL || report.written > 0)
        return 99;
    if (scrub_file(name, true, &report, &fault) != FIRN_OK || report.rebuilt != RUN + 5)
        return 98;
    return (int)status;
}

static void keeps_to_its_rights(void **state)
{
    struct firn_store store;
    struct firn_fault fault;
    int outcome;

    (void)state;
    put_damaged("held.firn", 0644);
    assert_int_equal(firn_store_open(scratch_path("held.firn"), FIRN_STORE_READ, firn_memory_system(), &store, &fault),
                     FIRN_OK);
    assert_int_equal(firn_store_lock(&store, &fault), FIRN_OK);
    assert_int_equal(scratch_in_child(scrub_status, (char[]){ "held.firn" }), FIRN_BUSY);
    store.close(store.self);
    assert_int_equal(scratch_in_child(scrub_status, (char[]){ "held.firn" }), FIRN_OK);
    expect_file_as_packed("held.firn");

    put_damaged("read-only.firn", 0444);
    assert_int_equal(mkdir(scratch_path("shut"), 0755), 0);
    put_damaged("shut/core.firn", 0666);
    assert_int_equal(chmod(scratch_path("shut"), 0555), 0);
    outcome = scratch_in_child(scrub_as_nobody, (char[]){ "read-only.firn" });
    if (outcome == 77)
        skip();
    assert_int_equal(outcome, FIRN_READ_ONLY);
    assert_int_equal(scratch_in_child(scrub_as_nobody, (char[]){ "shut/core.firn" }), FIRN_CANNOT_CREATE);
}

/* Half as long again as a scrub that repairs takes here, in nanoseconds; less than a second. */
static long longer_than_a_scrub(void)
{
    struct timespec before, after;
    long nanoseconds;

    put_damaged("killed.firn", 0644);
    clock_gettime(CLOCK_MONOTONIC, &before);
    assert_int_equal(scratch_in_child(scrub_status, (char[]){ "killed.firn" }), FIRN_OK);
    clock_gettime(CLOCK_MONOTONIC, &after);
    nanoseconds = (after.tv_sec - before.tv_sec) * 1000000000L + after.tv_nsec - before.tv_nsec;
    nanoseconds += nanoseconds / 2;
    return nanoseconds < 999999999L ? nanoseconds : 999999999L;
}

/* A process killed at a moment nobody chose; then the next scrub. */
static void survives_being_killed(void **state)
{
    struct firn_scrub_report report;
    struct firn_fault fault;
    unsigned killed = 0;
    long longest = longer_than_a_scrub();

    (void)state;
    for (unsigned i = 0; i < 40; i++) {
        struct timespec moment = { 0, (long)random_below(&dice, (unsigned)longest) };
        pid_t child;

        put_damaged("killed.firn", 0644);
        fflush(NULL);
        child = fork();
        assert_true(child >= 0);
        if (child == 0)
            _exit(scrub_status((char[]){ "killed.firn" }));
        nanosleep(&moment, NULL);
        kill(child, SIGKILL);
        killed += scratch_wait(child) == -1;
        assert_int_equal(scrub_file("killed.firn", false, &report, &fault), FIRN_OK);
        assert_int_equal(report.lost, 0);
        expect_file_as_packed("killed.firn");
        assert_int_equal(access(scratch_path("killed.firn.mend"), F_OK), -1);
    }
    print_message("killed %u of 40\n", killed);
}


static int start(void **state)
{
    (void)state;
    dice = random_start("scrub");
    scratch_make();
    packed = collection_make(90, 21, &geometry, 1);
    whole_bytes = packed->buffer.used;
    blocks = whole_bytes / 4096 - 1;
    return blocks > 3 * SHEET + 60 && blocks % SHEET != 0 ? 0 : -1;
}

static int end(void **state)
{
    (void)state;
    collection_free(packed);
    scratch_remove();
    return 0;
}

int main(void)
{
    static const struct CMUnitTest singles[] = {
        cmocka_unit_test(is_silent_when_all_is_well), cmocka_unit_test(mends_stray_bits),
        cmocka_unit_test(rebuilds_a_run_from_the_reserve), cmocka_unit_test(tells_what_is_lost),
        cmocka_unit_test(goes_on_where_it_is_told), cmocka_unit_test(tells_how_far_it_came),
        cmocka_unit_test(joins_lost_blocks_to_runs), cmocka_unit_test(heals_the_title_page),
        cmocka_unit_test(grows_what_was_cut_short), cmocka_unit_test(leaves_what_is_not_its_own),
        cmocka_unit_test(knows_the_end_of_a_last_sheet_that_is_full), cmocka_unit_test(mends_what_has_no_reserve),
        cmocka_unit_test(only_reports_when_told_so), cmocka_unit_test(checks_on_when_nothing_can_be_written),
        cmocka_unit_test(tells_what_stands_in_the_journals_place), cmocka_unit_test(rebuilds_what_cannot_be_read),
        cmocka_unit_test(finishes_a_repair_first), cmocka_unit_test(survives_any_single_failure),
        cmocka_unit_test(survives_every_power_cut),
        cmocka_unit_test(survives_want_of_memory), cmocka_unit_test(stops_when_asked), cmocka_unit_test(scrubs_a_file),
        cmocka_unit_test(keeps_to_its_rights), cmocka_unit_test(survives_being_killed),
    };
    enum { SINGLES = sizeof singles / sizeof singles[0], REFUSED = sizeof refused_cases / sizeof refused_cases[0] };
    struct CMUnitTest tests[SINGLES + REFUSED];

    memcpy(tests, singles, sizeof singles);
    for (size_t i = 0; i < REFUSED; i++)
        tests[SINGLES + i] = (struct CMUnitTest){ refused_cases[i].name, refuses_what_is_no_container, NULL, NULL,
                                                  (void *)(uintptr_t)&refused_cases[i] };
    return cmocka_run_group_tests_name("scrub", tests, start, end);
}
