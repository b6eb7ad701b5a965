/*
 * tests/coding/test_segment.c - segments: there and back, by the vectors of the specification, and damaged in every way
 * SPDX-License-Identifier: BSD-2-Clause
 */
#include "firn/segment.h"

#include "coding/candidates.h"
#include "coding/random.h"

#include "firn/prefix.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stdbool.h>
#include <stddef.h>
#include <string.h>

#include <cmocka.h>

enum { RAW_MAX = FIRN_SEGMENT_RAW_MAX, EFFORTS = FIRN_SEGMENT_EFFORT_THOROUGH + 1, VECTOR_LINE_MAX = 8192 };

static uint8_t raw[RAW_MAX];
static void *encode_work, *decode_work;

/* ---- kinds of data ---- */

static unsigned constant(size_t i)   { (void)i; return 'x'; }
static unsigned two(size_t i)        { return i % 7 == 0 ? 'a' : 'b'; }
static unsigned noise(size_t i)      { (void)i; return random_below(256); }
static unsigned rising(size_t i)     { return (unsigned)(i / 300 + random_below(1 + (uint32_t)(i / 2000 % 40))); }

static unsigned letters(size_t i)
{
    (void)i;
    return (uint8_t)"etaoin shrdlu"[random_below(13) * random_below(13) / 13];
}

static unsigned mixture(size_t i)
{
    size_t part = i / 5000 % 3;

    return part == 0 ? letters(i) : part == 1 ? noise(i) : constant(i);
}

/* Each value half as likely as the one before, over 40 values: words as long as they may be. */
static unsigned skewed(size_t i)
{
    unsigned value = 0;

    (void)i;
    for (uint64_t word = random_word(); value < 40 && (word & 1) != 0; word >>= 1)
        value++;
    return value;
}

/* Words of a few dozen kinds: repeats. */
static unsigned words(size_t i)
{
    static char word[8];

    if (i % 8 == 0) {
        uint32_t which = random_below(60);

        for (uint32_t k = 0; k < 8; k++)
            word[k] = (char)(k == 7 ? ' ' : 'a' + (which * (k + 7) + k * k) % 26);
    }
    return (uint8_t)word[i % 8];
}

/* Three channels in rows of 64 pixels, smooth but for some noise. */
static unsigned raster(size_t i)
{
    size_t pixel = i / 3, x = pixel % 64, y = pixel / 64;

    return (unsigned)(x * (i % 3 + 1) + y * 2 + x * y / 64 + random_below(3)) & 255;
}

/* Sixteen bits, little-endian, two channels. */
static unsigned sound(size_t i)
{
    static int level[2];

    if (i % 2 == 0)
        level[i / 2 % 2] += (int)random_below(401) - 200 - level[i / 2 % 2] / 64;
    return (unsigned)level[i / 2 % 2] >> (i % 2 * 8) & 255;
}

/* Calls of a dozen functions, by distance. */
static unsigned calls(size_t i)
{
    static uint32_t distance;

    if (i % 9 == 4) {
        distance = random_below(12) * 5000 + 77 - (uint32_t)(i + 1);
        return 0xE8;
    }
    return i % 9 > 4 ? distance >> (i % 9 - 5) * 8 & 255 : UINT32_C(0xC3894855) >> i % 9 * 8 & 255;
}

static const struct kind {
    const char *name;
    unsigned (*byte)(size_t i);
} kinds[] = { { "constant", constant }, { "two symbols", two }, { "noise", noise }, { "letters", letters },
              { "mixture", mixture },   { "rising", rising },   { "skewed", skewed },
              { "words", words },       { "raster", raster },   { "sound", sound }, { "calls", calls } };

enum { KINDS = sizeof kinds / sizeof *kinds };

static void fill(const struct kind *kind, size_t count)
{
    for (size_t i = 0; i < count; i++)
        raw[i] = (uint8_t)kind->byte(i);
}

/* ---- there and back ---- */

static size_t encode(size_t raw_bytes, unsigned effort, uint8_t *coded)
{
    size_t coded_bytes = 0;

    assert_int_equal(firn_segment_encode(raw, raw_bytes, (enum firn_segment_effort)effort, coded, &coded_bytes,
                                         encode_work), FIRN_OK);
    assert_true(coded_bytes <= firn_segment_bound(raw_bytes));
    return coded_bytes;
}

/* In exactly sized buffers, so that the address sanitizer sees a step beside them. Returns the coded bytes. */
static size_t round_trip(size_t raw_bytes, unsigned effort)
{
    uint8_t *coded = malloc(firn_segment_bound(raw_bytes)), *exact, *back = malloc(raw_bytes);
    size_t coded_bytes;

    assert_non_null(coded);
    assert_non_null(back);
    assert_int_equal(firn_segment_encode(raw, raw_bytes, effort, coded, &coded_bytes, encode_work), FIRN_OK);
    exact = malloc(coded_bytes);
    assert_non_null(exact);
    memcpy(exact, coded, coded_bytes);
    assert_int_equal(firn_segment_decode(exact, coded_bytes, back, raw_bytes, decode_work), FIRN_OK);
    assert_memory_equal(back, raw, raw_bytes);
    free(exact);
    free(back);
    free(coded);
    return coded_bytes;
}

/* Every small size, efforts in turn, then sizes about the places where streams, cells and segments begin and end. */
static void sizes(void **state)
{
    const struct kind *kind = *state;

    random_start();
    fill(kind, 3000);
    for (size_t size = 1; size <= 3000; size += size < 280 ? 1 : 41)
        round_trip(size, (unsigned)(size % EFFORTS));
    fill(kind, RAW_MAX);
    for (size_t place = 4096; place <= RAW_MAX; place *= 16)
        for (size_t size = place - 1; size <= place + 1 && size <= RAW_MAX; size++)
            round_trip(size, (unsigned)(place + size) % EFFORTS);
}

static void refuses_sizes(void **state)
{
    static const struct {
        size_t raw_bytes;
        unsigned effort;
    } refused[] = { { 0, 1 }, { RAW_MAX + 1, 1 }, { 1, EFFORTS } };
    uint8_t coded[8] = { 0 };
    size_t coded_bytes;

    (void)state;
    for (size_t k = 0; k < 3; k++)
        assert_int_equal(firn_segment_encode(raw, refused[k].raw_bytes, (enum firn_segment_effort)refused[k].effort,
                                             coded, &coded_bytes, encode_work), FIRN_BAD_ARGUMENT);
    for (size_t count = 0; count < 3; count++)
        assert_int_equal(firn_segment_decode(coded, count, raw, 1, decode_work), FIRN_BAD_DATA);
    assert_int_equal(firn_segment_decode(coded, 2, raw, 0, decode_work), FIRN_BAD_DATA);
    assert_int_equal(firn_segment_decode(coded, 3, raw, RAW_MAX + 1, decode_work), FIRN_BAD_DATA);
}

/* What the work space held before makes no difference. */
static void repeatable(void **state)
{
    static uint8_t first[RAW_MAX / 8 + 16], second[RAW_MAX / 8 + 16];
    size_t first_bytes, second_bytes;

    (void)state;
    random_start();
    for (size_t k = 0; k < KINDS; k++)
        for (unsigned effort = 0; effort < EFFORTS; effort++) {
            size_t count = 1 + random_below(RAW_MAX / 16);

            fill(&kinds[k], count);
            memset(encode_work, 0, firn_segment_encode_work_bytes());
            first_bytes = encode(count, effort, first);
            memset(encode_work, 0xA5, firn_segment_encode_work_bytes());
            second_bytes = encode(count, effort, second);
            assert_int_equal(first_bytes, second_bytes);
            assert_memory_equal(first, second, first_bytes);
        }
}

/* ---- what it is told to be ---- */

struct told {
    size_t stretches, raw_bytes, coded_bytes;
    uint64_t bits;                     /* of words and tables */
    bool sound;
};

static void tell(void *self, const struct firn_segment_stretch *stretch)
{
    struct told *told = self;
    uint32_t counts[256] = { 0 };

    told->sound = told->sound && stretch->raw_at == told->raw_bytes && stretch->raw_bytes > 0;
    for (size_t i = 0; i < stretch->raw_bytes; i++)
        counts[raw[stretch->raw_at + i]]++;
    told->sound = told->sound && memcmp(counts, stretch->counts, sizeof counts) == 0;
    if (stretch->lengths != NULL)
        told->sound = told->sound && stretch->code_bits == firn_prefix_cost_bits(counts, stretch->lengths, 256) &&
                      (stretch->code_bits + stretch->table_bits + 7) / 8 <= stretch->coded_bytes &&
                      stretch->coded_bytes <= (stretch->code_bits + stretch->table_bits) / 8 + 32;
    else if (stretch->method == FIRN_SEGMENT_MATCHED || stretch->method == FIRN_SEGMENT_SAMPLES)
        told->sound = told->sound && stretch->code_bits > 0 && stretch->table_bits > 0 &&
                      (stretch->code_bits + stretch->table_bits) / 8 <= stretch->coded_bytes;
    else
        told->sound = told->sound && stretch->code_bits == 0 && stretch->table_bits == 0;
    told->stretches++;
    told->raw_bytes += stretch->raw_bytes;
    told->coded_bytes += stretch->coded_bytes;
    told->bits += stretch->code_bits + stretch->table_bits;
}

static struct told examine(const uint8_t *coded, size_t coded_bytes, size_t raw_bytes)
{
    struct told told = { .sound = true };

    assert_int_equal(firn_segment_examine(coded, coded_bytes, raw, raw_bytes, decode_work, tell, &told), FIRN_OK);
    assert_true(told.sound);
    assert_int_equal(told.raw_bytes, raw_bytes);
    assert_int_equal(told.coded_bytes + 2, coded_bytes);
    return told;
}

static void tells(void **state)
{
    static uint8_t coded[RAW_MAX / 2 + 16];
    size_t coded_bytes;

    (void)state;
    random_start();
    for (size_t k = 0; k < KINDS; k++)
        for (unsigned effort = 0; effort < EFFORTS; effort++) {
            size_t count = 1 + random_below(RAW_MAX / 16);

            fill(&kinds[k], count);
            coded_bytes = encode(count, effort, coded);
            examine(coded, coded_bytes, count);
        }
}

/* Where the statistics change there are several stretches, and they are smaller than one would be. */
static void several_stretches(void **state)
{
    static uint8_t coded[RAW_MAX + 16];
    static uint32_t counts[256];
    static uint64_t work[4096];
    uint8_t lengths[256];
    size_t coded_bytes;

    (void)state;
    random_start();
    fill(&kinds[5], RAW_MAX);          /* rising */
    for (size_t i = 0; i < RAW_MAX; i++)
        counts[raw[i]]++;
    assert_int_equal(firn_prefix_lengths(counts, 256, 11, lengths, work), FIRN_OK);
    for (unsigned effort = FIRN_SEGMENT_EFFORT_QUICK; effort < EFFORTS; effort++) {
        coded_bytes = firn_candidates_stretches(raw, RAW_MAX, (enum firn_segment_effort)effort, coded, encode_work);
        assert_true(examine(coded, coded_bytes, RAW_MAX).stretches > 4);
        assert_true(coded_bytes < firn_prefix_cost_bits(counts, lengths, 256) / 8);
    }
}

/* More effort costs no more, but for a percent: what is hasty may be lucky. */
static void effort_pays(void **state)
{
    (void)state;
    random_start();
    for (size_t k = 0; k < KINDS; k++) {
        size_t quick, normal, thorough, stored;

        fill(&kinds[k], RAW_MAX / 8);
        stored = round_trip(RAW_MAX / 8, FIRN_SEGMENT_EFFORT_NONE);
        quick = round_trip(RAW_MAX / 8, FIRN_SEGMENT_EFFORT_QUICK);
        normal = round_trip(RAW_MAX / 8, FIRN_SEGMENT_EFFORT_NORMAL);
        thorough = round_trip(RAW_MAX / 8, FIRN_SEGMENT_EFFORT_THOROUGH);
        assert_int_equal(stored, RAW_MAX / 8 + 2);
        assert_true(quick <= stored && normal <= quick + quick / 100 && thorough <= normal + normal / 100);
    }
}

/* ---- every method on every kind of data ---- */

static const struct firn_samples_shape shapes[] = {
    { .width = 1, .channels = 1 },
    { .width = 1, .channels = 3, .lean = true, .row = 192, .predictor = FIRN_SAMPLES_MEDIAN, .head_bytes = 5 },
    { .width = 1, .channels = 3, .row = 192, .predictor = FIRN_SAMPLES_BENT },
    { .width = 1, .channels = 4, .row = 64, .predictor = FIRN_SAMPLES_PLANE, .lean = true },
    { .width = 1, .channels = 1, .row = 64, .predictor = FIRN_SAMPLES_MEAN, .head_bytes = 1 },
    { .width = 1, .channels = 1, .row = 2, .predictor = FIRN_SAMPLES_UP },
    { .width = 1, .channels = 2, .predictor = FIRN_SAMPLES_LINE, .lean = true },
    { .width = 1, .channels = 8, .row = 16, .predictor = FIRN_SAMPLES_CURVE },
    { .width = 1, .channels = 5, .row = 0, .predictor = FIRN_SAMPLES_NOTHING, .head_bytes = 300 },
    { .width = 2, .channels = 2, .predictor = FIRN_SAMPLES_LINE },
    { .width = 2, .channels = 1, .predictor = FIRN_SAMPLES_CURVE, .head_bytes = 1 },
    { .width = 2, .channels = 2, .row = 32, .predictor = FIRN_SAMPLES_PLANE, .big = true, .lean = true },
    { .width = 3, .channels = 2, .predictor = FIRN_SAMPLES_LEFT, .lean = true },
    { .width = 3, .channels = 1, .row = 17, .predictor = FIRN_SAMPLES_MEDIAN, .big = true },
    { .width = 4, .channels = 1, .row = 16, .predictor = FIRN_SAMPLES_BENT, .floats = true, .big = true },
    { .width = 4, .channels = 4, .predictor = FIRN_SAMPLES_LINE, .floats = true },
    { .width = 4, .channels = 2, .row = 64, .predictor = FIRN_SAMPLES_MEAN },
    { .width = 4, .channels = 1, .row = 64, .predictor = FIRN_SAMPLES_UP },
    { .width = 2, .channels = 1, .predictor = FIRN_SAMPLES_NOTHING },
};

enum { SHAPES = sizeof shapes / sizeof *shapes };

/* Decodes what was forced, if it was made at all; the cost that is told is what was written. Returns its size. */
static size_t forced(size_t raw_bytes, const uint8_t *coded, size_t coded_bytes)
{
    uint8_t *exact, *back;

    if (coded_bytes == 0)
        return firn_segment_bound(raw_bytes);
    exact = malloc(coded_bytes);
    back = malloc(raw_bytes);
    assert_true(exact != NULL && back != NULL);
    memcpy(exact, coded, coded_bytes);
    assert_int_equal(firn_segment_decode(exact, coded_bytes, back, raw_bytes, decode_work), FIRN_OK);
    assert_memory_equal(back, raw, raw_bytes);
    examine(exact, coded_bytes, raw_bytes);
    free(back);
    free(exact);
    return coded_bytes;
}

/*
 * Whatever is forced gives the same bytes back. What is chosen is not larger than any match or stretch that is forced,
 * but for what quick looks miss: a fiftieth, and an eighth where shapes of numbers have to be guessed.
 */
static void every_method(void **state)
{
    static uint8_t coded[RAW_MAX + 2];
    const struct kind *kind = *state;
    static const size_t counts[] = { 40, 700, 5000, 40001 };
    struct firn_candidates_work *w = encode_work;

    random_start();
    for (size_t n = 0; n < sizeof counts / sizeof *counts; n++) {
        size_t count = counts[n], least = SIZE_MAX, shaped = SIZE_MAX, size;

        fill(kind, count);
        firn_cost_prepare(&w->logs);
        for (unsigned effort = FIRN_SEGMENT_EFFORT_QUICK; effort < EFFORTS; effort++) {
            for (unsigned t = FIRN_SEGMENT_PLAIN; t <= FIRN_SEGMENT_BRANCHES; t++) {
                size = forced(count, coded, firn_candidates_matched(raw, count, effort, t, coded, w));
                least = size < least ? size : least;
            }
            size = forced(count, coded, firn_candidates_stretches(raw, count, effort, coded, w));
            least = size < least ? size : least;
        }
        for (size_t s = 0; s < SHAPES; s++) {
            if (!firn_samples_shape_is_sound(&shapes[s], count))
                continue;
            size = forced(count, coded, firn_candidates_samples(raw, count, &shapes[s], coded, w));
            shaped = size < shaped ? size : shaped;
        }
        size = round_trip(count, FIRN_SEGMENT_EFFORT_THOROUGH);
        if (size > least + least / 50 + 8 || (count >= 5000 && size > shaped + shaped / 8))
            fail_msg("%s, %zu bytes: chosen %zu, forced %zu and %zu", kind->name, count, size, least, shaped);
    }
}

/* ---- damaged ---- */

/*
 * A decoder that is given bad data says so or makes the best of it; the sanitizers see whether it stays in its
 * bounds.
 */
static void survives(const uint8_t *coded, size_t coded_bytes, size_t raw_bytes)
{
    uint8_t *exact = malloc(coded_bytes), *back = malloc(raw_bytes);
    struct told told = { .sound = true };
    enum firn_status status;

    assert_true((exact != NULL || coded_bytes == 0) && back != NULL);
    if (coded_bytes > 0)
        memcpy(exact, coded, coded_bytes);
    status = firn_segment_decode(exact, coded_bytes, back, raw_bytes, decode_work);
    assert_true(status == FIRN_OK || status == FIRN_BAD_DATA);
    status = firn_segment_examine(exact, coded_bytes, raw, raw_bytes, decode_work, tell, &told);
    assert_true(status == FIRN_OK || status == FIRN_BAD_DATA);
    free(back);
    free(exact);
}

static void cut_anywhere(void **state)
{
    const struct kind *kind = *state;
    static uint8_t coded[20000];
    size_t coded_bytes;

    random_start();
    for (size_t count = 300; count <= 2700; count *= 3) {
        fill(kind, count);
        coded_bytes = encode(count, FIRN_SEGMENT_EFFORT_THOROUGH, coded);
        for (size_t cut = 0; cut < coded_bytes; cut++) {
            uint8_t *exact = malloc(cut + 1), *back = malloc(count);

            assert_true(exact != NULL && back != NULL);
            memcpy(exact, coded, cut);
            assert_int_equal(firn_segment_decode(exact, cut, back, count, decode_work), FIRN_BAD_DATA);
            free(back);
            free(exact);
            survives(coded, cut, count);
        }
        memcpy(coded + coded_bytes, "", 1);
        assert_int_equal(firn_segment_decode(coded, coded_bytes + 1, raw, count, decode_work), FIRN_BAD_DATA);
    }
}

static void every_byte_wrong(void **state)
{
    const struct kind *kind = *state;
    static uint8_t coded[4000];
    size_t coded_bytes;

    random_start();
    for (size_t count = 40; count <= 2500; count *= 8) {
        fill(kind, count);
        coded_bytes = encode(count, FIRN_SEGMENT_EFFORT_NORMAL, coded);
        for (size_t at = 0; at < coded_bytes; at++)
            for (unsigned flip = 1; flip < 256; flip += at < 100 ? 5 : 63) {
                coded[at] ^= (uint8_t)flip;
                survives(coded, coded_bytes, count);
                coded[at] ^= (uint8_t)flip;
            }
    }
}

static void garbage(void **state)
{
    static uint8_t coded[3000];

    (void)state;
    random_start();
    for (unsigned round = 0; round < 20000; round++) {
        size_t count = 3 + random_below(round % 8 == 0 ? 2900 : 100);

        for (size_t i = 0; i < count; i++)
            coded[i] = (uint8_t)(random_word() & random_word());
        coded[0] = (uint8_t)random_below(5);
        coded[1] = (uint8_t)(random_below(8) == 0);
        coded[2] &= coded[0] == 2 ? 15 : 31;
        survives(coded, count, 1 + random_below(5000));
    }
}

/* Several places of a large, sound segment overwritten: gets past the heads more often. */
static void scars(void **state)
{
    static uint8_t coded[40000], scarred[40000];
    size_t coded_bytes;

    (void)state;
    random_start();
    fill(&kinds[4], 30000);            /* mixture */
    coded_bytes = encode(30000, FIRN_SEGMENT_EFFORT_THOROUGH, coded);
    for (unsigned round = 0; round < 1000; round++) {
        memcpy(scarred, coded, coded_bytes);
        for (unsigned k = random_below(5) + 1; k > 0; k--)
            scarred[random_below((uint32_t)coded_bytes)] = (uint8_t)random_word();
        survives(scarred, coded_bytes, 30000);
    }
}

/* ---- the vectors of the specification ---- */

static size_t bytes_of(const char *hex, uint8_t *bytes)
{
    size_t count = 0;
    unsigned value;

    for (; sscanf(hex, "%2x", &value) == 1; hex += 2)
        bytes[count++] = (uint8_t)value;
    return count;
}

static void vectors(void **state)
{
    static char line[VECTOR_LINE_MAX];
    static uint8_t expected[VECTOR_LINE_MAX], given[VECTOR_LINE_MAX];
    FILE *file = fopen(FIRN_SOURCE_DIR "/format-spec/vectors/segment.txt", "r");
    size_t raw_bytes = 0, given_bytes;
    unsigned seen[3] = { 0 };

    (void)state;
    assert_non_null(file);
    while (fgets(line, sizeof line, file) != NULL) {
        char *kind = strchr(line, '.'), *hex = strchr(line, ':');

        if (line[0] == '#')
            continue;
        assert_true(kind != NULL && hex != NULL && kind < hex);
        given_bytes = bytes_of(hex + 1 + strspn(hex + 1, " "), given);
        if (strncmp(kind, ".raw:", 5) == 0) {
            memcpy(expected, given, given_bytes);
            raw_bytes = given_bytes;
            seen[0]++;
            continue;
        }
        if (strncmp(kind, ".bad:", 5) == 0) {
            assert_int_equal(firn_segment_decode(given, given_bytes, raw, raw_bytes, decode_work), FIRN_BAD_DATA);
            seen[1]++;
            continue;
        }
        memset(raw, 0, raw_bytes);
        assert_int_equal(firn_segment_decode(given, given_bytes, raw, raw_bytes, decode_work), FIRN_OK);
        assert_memory_equal(raw, expected, raw_bytes);
        examine(given, given_bytes, raw_bytes);
        seen[2]++;
    }
    fclose(file);
    assert_true(seen[0] >= 9 && seen[1] >= 20 && seen[2] >= 10);
}

int main(void)
{
    static const struct CMUnitTest others[] = {
        cmocka_unit_test(refuses_sizes), cmocka_unit_test(repeatable), cmocka_unit_test(tells),
        cmocka_unit_test(several_stretches), cmocka_unit_test(effort_pays), cmocka_unit_test(garbage),
        cmocka_unit_test(scars), cmocka_unit_test(vectors)
    };
    static const struct { const char *name; CMUnitTestFunction call; } about[] = {
        { "sizes", sizes }, { "cut anywhere", cut_anywhere }, { "every byte wrong", every_byte_wrong },
        { "every method", every_method } };
    struct CMUnitTest rows[KINDS];
    int failed = 0;

    encode_work = aligned_alloc(64, (firn_segment_encode_work_bytes() + 63) / 64 * 64);
    decode_work = aligned_alloc(64, (firn_segment_decode_work_bytes() + 63) / 64 * 64);
    if (encode_work == NULL || decode_work == NULL)
        return 1;
    for (size_t a = 0; a < sizeof about / sizeof *about; a++) {
        for (size_t k = 0; k < KINDS; k++)
            rows[k] = (struct CMUnitTest){ kinds[k].name, about[a].call, NULL, NULL, (void *)(uintptr_t)&kinds[k] };
        failed += cmocka_run_group_tests_name(about[a].name, rows, NULL, NULL);
    }
    failed += cmocka_run_group_tests_name("segment", others, NULL, NULL);
    free(decode_work);
    free(encode_work);
    return failed;
}
