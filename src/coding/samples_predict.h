/*
 * coding/samples_predict.h - what a number is expected to be, from those around it
 *
 * Room: coding. Pure. Used by coding/samples.c, which makes numbers of residuals, and coding/samples_differ.c, which
 * makes residuals of numbers. The predictor is a constant wherever time matters, so that each gets a loop of its own.
 *
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_CODING_SAMPLES_PREDICT_H
#define FIRN_CODING_SAMPLES_PREDICT_H

#include "coding/samples.h"

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

/* Whether it needs the row above. */
static inline bool firn_samples_predict_looks_up(enum firn_samples_predictor predictor)
{
    return predictor >= FIRN_SAMPLES_UP && predictor <= FIRN_SAMPLES_BENT;
}

/* ---- numbers of any width ---- */

/* Written so that compilers make no jumps of it. */
static inline int32_t firn_samples_predict_middle(int32_t a, int32_t b, int32_t c)
{
    int32_t low = a < b ? a : b, high = a < b ? b : a, below = c < high ? c : high;

    return below > low ? below : low;
}

/* Sums wrap round, so they are made without sign. */
static inline int32_t firn_samples_predict_wrap(uint32_t value)
{
    return (int32_t)value;
}

/* What x[i] is expected to be; i >= channels, and i >= row + channels for predictors that look up. */
static inline int32_t firn_samples_predict(enum firn_samples_predictor predictor, const int32_t *x, size_t i, size_t c,
                                           size_t row)
{
    uint32_t w = (uint32_t)x[i - c], n = (uint32_t)x[i - row], nw = (uint32_t)x[i - row - c];

    switch (predictor) {
    case FIRN_SAMPLES_UP:
        return firn_samples_predict_wrap(n);
    case FIRN_SAMPLES_PLANE:
        return firn_samples_predict_wrap(w + n - nw);
    case FIRN_SAMPLES_MEDIAN:
        return firn_samples_predict_middle(firn_samples_predict_wrap(w), firn_samples_predict_wrap(n),
                                           firn_samples_predict_wrap(w + n - nw));
    case FIRN_SAMPLES_MEAN:
        return (int32_t)(((int64_t)firn_samples_predict_wrap(w) + firn_samples_predict_wrap(n)) >> 1);
    case FIRN_SAMPLES_BENT:
        return (int32_t)((3 * (int64_t)firn_samples_predict_wrap(w) + 3 * (int64_t)firn_samples_predict_wrap(n) -
                          2 * (int64_t)firn_samples_predict_wrap(nw)) >>
                         2);
    case FIRN_SAMPLES_LINE:
        return firn_samples_predict_wrap(2 * w - (uint32_t)(i >= 2 * c ? x[i - 2 * c] : x[i - c]));
    case FIRN_SAMPLES_CURVE:
        if (i < 3 * c)
            return firn_samples_predict_wrap(w);
        return firn_samples_predict_wrap(3 * w - 3 * (uint32_t)x[i - 2 * c] + (uint32_t)x[i - 3 * c]);
    default:
        return firn_samples_predict_wrap(w);
    }
}

/* The prediction at the edges too: nothing in front; the left one as long as what is looked for is not there. */
static inline int32_t firn_samples_predict_number(const struct firn_samples_shape *shape, const int32_t *x, size_t i)
{
    if (shape->predictor == FIRN_SAMPLES_NOTHING || i < shape->channels)
        return 0;
    if (!firn_samples_predict_looks_up(shape->predictor))
        return firn_samples_predict(shape->predictor, x, i, shape->channels, 0);
    if (i < shape->row + shape->channels)
        return x[i - shape->channels];
    return firn_samples_predict(shape->predictor, x, i, shape->channels, shape->row);
}

/* ---- numbers of one byte ---- */

/* What stands around a number: to the left, two and three to the left, above, above to the left. */
struct firn_samples_predict_around {
    int w, ww, www, n, nw;
};

/* Of which the low eight bits count. */
static inline int firn_samples_predict_byte(enum firn_samples_predictor predictor,
                                            const struct firn_samples_predict_around *a)
{
    switch (predictor) {
    case FIRN_SAMPLES_UP:
        return a->n;
    case FIRN_SAMPLES_PLANE:
        return a->w + a->n - a->nw;
    case FIRN_SAMPLES_MEDIAN:
        return firn_samples_predict_middle(a->w, a->n, a->w + a->n - a->nw);
    case FIRN_SAMPLES_MEAN:
        return (a->w + a->n) / 2;
    case FIRN_SAMPLES_BENT:
        return (3 * (a->w + a->n) - 2 * a->nw) >> 2;
    case FIRN_SAMPLES_LINE:
        return 2 * a->w - a->ww;
    case FIRN_SAMPLES_CURVE:
        return 3 * (a->w - a->ww) + a->www;
    case FIRN_SAMPLES_NOTHING:
        return 0;
    default:
        return a->w;
    }
}

#endif
