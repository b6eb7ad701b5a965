/*
 * coding/samples.h - a segment of numbers: rasters, sound, grids; each predicted from its neighbours
 *
 * Room: coding. Pure. Layout and meaning: format-spec/segment.md, "Samples". The bytes are numbers of one width, of
 * several channels in turn, perhaps in rows. A number is predicted from those before it and above it; what it differs
 * by, the residual, is coded under contexts: how much its neighbours differed. Four parts are coded side by side.
 *
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_CODING_SAMPLES_H
#define FIRN_CODING_SAMPLES_H

#include "coding/contexts.h"

#include "base/log2.h"
#include "firn/segment.h"
#include "firn/status.h"

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

enum {
    FIRN_SAMPLES_PARTS = 4,
    FIRN_SAMPLES_WIDTH_MAX = 4,
    FIRN_SAMPLES_CHANNELS_MAX = 8,
    FIRN_SAMPLES_ROW_MAX = 1 << 15,                /* samples */
    FIRN_SAMPLES_HEAD_MAX = (1 << 14) - 1,         /* bytes in front of the first sample */
    FIRN_SAMPLES_CONTEXTS = 512,
    FIRN_SAMPLES_LINE_PIXELS = 512,                  /* pixels of a line when there are no rows */
    FIRN_SAMPLES_SIZE_MAX = 60,
    FIRN_SAMPLES_MARGIN = 2,                       /* zeros on both sides of a channel of a line */
    FIRN_SAMPLES_LIMIT = 11,
    FIRN_SAMPLES_ENTRIES = 1 << FIRN_SAMPLES_LIMIT,
    FIRN_SAMPLES_LINE_BYTES = FIRN_SAMPLES_ROW_MAX + FIRN_SAMPLES_LINE_PIXELS * FIRN_SAMPLES_CHANNELS_MAX +
                              2 * FIRN_SAMPLES_MARGIN * FIRN_SAMPLES_CHANNELS_MAX
};

/* The bits of the kind byte, from the lowest on. */
enum {
    FIRN_SAMPLES_WIDTH_BITS = 3,                   /* width - 1 */
    FIRN_SAMPLES_BIG = 4,                          /* most significant byte first */
    FIRN_SAMPLES_FLOATS = 8,                       /* sign and magnitude: IEEE 754 */
    FIRN_SAMPLES_LEAN = 16                         /* residuals lean on the channel before */
};

enum firn_samples_predictor {
    FIRN_SAMPLES_LEFT,                             /* W */
    FIRN_SAMPLES_UP,                               /* N */
    FIRN_SAMPLES_PLANE,                            /* W + N - NW */
    FIRN_SAMPLES_MEDIAN,                           /* the middle one of W, N and W + N - NW */
    FIRN_SAMPLES_MEAN,                             /* (W + N) / 2 */
    FIRN_SAMPLES_BENT,                             /* (3 W + 3 N - 2 NW) / 4 */
    FIRN_SAMPLES_LINE,                             /* 2 W - WW */
    FIRN_SAMPLES_CURVE,                            /* 3 W - 3 WW + WWW */
    FIRN_SAMPLES_NOTHING,                          /* 0 */
    FIRN_SAMPLES_PREDICTORS
};

struct firn_samples_shape {
    unsigned width, channels;
    bool big, floats, lean;
    enum firn_samples_predictor predictor;
    size_t head_bytes, row;                        /* row: samples from one row to the next; 0: no rows */
};

/* Tells whether a reader would take it. */
bool firn_samples_shape_is_sound(const struct firn_samples_shape *shape, size_t raw_bytes);

/* All channels of one place make a pixel; there are only whole ones. */
static inline size_t firn_samples_pixels(const struct firn_samples_shape *shape, size_t raw_bytes)
{
    return (raw_bytes - shape->head_bytes) / shape->width / shape->channels;
}

/* Where part k begins, in pixels. */
static inline size_t firn_samples_part(size_t pixels, size_t k)
{
    return k == FIRN_SAMPLES_PARTS ? pixels : pixels / FIRN_SAMPLES_PARTS * k;
}

/* The pixels of a line. */
static inline size_t firn_samples_line(const struct firn_samples_shape *shape)
{
    return shape->row == 0 ? FIRN_SAMPLES_LINE_PIXELS : shape->row / shape->channels;
}

/* ---- shared by writer and reader ---- */

/* How much a residual of one byte differs from none. */
static inline uint8_t firn_samples_size(uint8_t residual)
{
    uint8_t other = (uint8_t)-residual, size = residual < other ? residual : other;

    return size < FIRN_SAMPLES_SIZE_MAX ? size : FIRN_SAMPLES_SIZE_MAX;
}

/*
 * Sizes of the residuals of one part, line by line: of the line at hand, the one above it and the one above that. Each
 * channel of a line has zeros on both sides. All zero to begin with.
 */
struct firn_samples_lines {
    uint8_t *line[3];                  /* at hand, above, above that; they go round */
    uint8_t room[3][FIRN_SAMPLES_LINE_BYTES];
};

void firn_samples_lines_start(struct firn_samples_lines *lines);
void firn_samples_lines_next(struct firn_samples_lines *lines, const struct firn_samples_shape *shape);

/*
 * Contexts of the first `width` residuals of a channel of the line at hand; they depend on lines above and channels
 * before.
 */
void firn_samples_lines_look(const struct firn_samples_lines *lines, const struct firn_samples_shape *shape,
                             unsigned channel, size_t width, uint16_t *contexts);

/* Tells the line what its residuals are. */
void firn_samples_lines_tell(struct firn_samples_lines *lines, const struct firn_samples_shape *shape, unsigned channel,
                             size_t width, const uint8_t *residuals);

/* A number that is small when the residual is, of `width` bytes: 0, -1, 1, -2 ... become 0, 1, 2, 3 ... */
static inline uint32_t firn_samples_fold(uint32_t residual, unsigned width)
{
    uint32_t shifted = residual << (32 - 8 * width);

    return ((shifted << 1) ^ (shifted >> 31 ? UINT32_MAX : 0)) >> (32 - 8 * width);
}

static inline uint32_t firn_samples_unfold(uint32_t folded)
{
    return folded >> 1 ^ (folded & 1 ? UINT32_MAX : 0);
}

/*
 * The token of a folded residual: below 16 itself, then four for each power of two; *more_bits tell it from its like.
 */
static inline unsigned firn_samples_token(uint32_t folded, unsigned *more_bits)
{
    unsigned exponent;

    *more_bits = 0;
    if (folded < 16)
        return folded;
    exponent = firn_log2(folded);
    *more_bits = exponent - 2;
    return 4 * exponent + (folded >> (exponent - 2) & 3);
}

/* The extra bits of a token. */
static inline unsigned firn_samples_more(unsigned token)
{
    return token < 16 ? 0 : token / 4 - 2;
}

/* Numbers out of bytes and back; x[i] is sign-extended, floats put in order. */
void firn_samples_load(const struct firn_samples_shape *shape, const uint8_t *raw, size_t count, int32_t *x);
void firn_samples_store(const struct firn_samples_shape *shape, const int32_t *x, size_t count, uint8_t *raw);

/* residuals[i] = x[i] - prediction, less the residual of the channel before when they lean. */
void firn_samples_differ(const struct firn_samples_shape *shape, const int32_t *x, size_t count, int32_t *residuals);

/* The same for numbers of one byte. */
void firn_samples_differ_bytes(const struct firn_samples_shape *shape, const uint8_t *raw, size_t count,
                               uint8_t *residuals);

/* And back, into bytes; count is that of whole pixels. x is used up. */
void firn_samples_restore(const struct firn_samples_shape *shape, size_t count, int32_t *x, uint8_t *raw);

/*
 * The same for a line of numbers of one byte, in the order they have.
 *
 * residuals  channel after channel, `width` of each; used up
 * at         how many numbers stand before the line, from raw - at on
 */
void firn_samples_restore_line(const struct firn_samples_shape *shape, uint8_t *residuals, size_t width, size_t at,
                               uint8_t *raw);

/* The context of wider numbers: tokens of late, in 1/8, and the one above if there are rows. */
static inline unsigned firn_samples_level(unsigned mean, unsigned above, bool rows, unsigned channel)
{
    return (rows ? ((mean >> 3) + above) / 2 : mean >> 3) + (channel > 0 ? 128u : 0u);
}

/* ---- writing ---- */

struct firn_samples_write_work {
    struct firn_cost_logs logs;
    int32_t x[FIRN_SEGMENT_RAW_MAX], residuals[FIRN_SEGMENT_RAW_MAX];
    uint8_t byte_residuals[FIRN_SEGMENT_RAW_MAX];
    struct firn_samples_lines lines;
    uint8_t tokens[FIRN_SEGMENT_RAW_MAX];          /* in the order of the streams */
    uint16_t contexts[FIRN_SEGMENT_RAW_MAX];
    uint32_t counts[FIRN_SAMPLES_CONTEXTS][256];
    uint32_t words[FIRN_CONTEXTS_TABLES_MAX][256];
    struct firn_contexts codes;
    struct firn_contexts_work clusters;
};

/* Bytes written, at most room_bytes; 0 when they do not fit. `logs` is prepared. */
size_t firn_samples_write(const struct firn_samples_shape *shape, const uint8_t *raw, size_t raw_bytes,
                          unsigned tables_max, uint8_t *room, size_t room_bytes, struct firn_samples_write_work *w);

/* ---- reading ---- */

struct firn_samples_read_work {
    struct firn_contexts codes;
    uint16_t entries[FIRN_CONTEXTS_TABLES_MAX * FIRN_SAMPLES_ENTRIES];
    uint16_t places[FIRN_SAMPLES_CONTEXTS];        /* of a context: the first entry of its table */
    uint32_t bases[128];                           /* of the tokens of wider numbers: the least folded residual */
    struct firn_samples_lines lines[FIRN_SAMPLES_PARTS];
    uint16_t contexts[FIRN_SAMPLES_PARTS][FIRN_SAMPLES_ROW_MAX + FIRN_SAMPLES_LINE_PIXELS];
    uint8_t tokens[FIRN_SEGMENT_RAW_MAX];          /* of one byte: lines, channel after channel in each */
    int32_t x[FIRN_SEGMENT_RAW_MAX];
    uint64_t table_bits;
};

enum firn_status firn_samples_read(const uint8_t *coded, size_t coded_bytes, uint8_t *raw, size_t raw_bytes,
                                   struct firn_samples_read_work *work);

/* How many bits codes and streams have. FIRN_OK or FIRN_BAD_DATA. */
enum firn_status firn_samples_measure(const uint8_t *coded, size_t coded_bytes, size_t raw_bytes, uint64_t *table_bits,
                                      uint64_t *code_bits, struct firn_samples_read_work *work);

#endif
