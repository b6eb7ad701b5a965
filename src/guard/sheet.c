/*
 * guard/sheet.c - the arithmetic of sheets and rows (format-spec/sheet.md)
 * SPDX-License-Identifier: BSD-2-Clause
 */
#include "firn/sheet.h"

#include "firn/block.h"

enum {
    LEAST_M = 4,
    MOST_M = 128,
    MOST_COLUMNS = 256,            /* points of the field */
    MOST_DEPTH = 4096,
    MOST_SHEET_BLOCKS = 65536,
    USUAL_M = 32,
    K_WITHOUT_RESERVE = 224
};

bool firn_sheet_geometry_valid(const struct firn_sheet_geometry *geometry)
{
    unsigned m = geometry->m, columns = geometry->k + m;

    if (m != 0 && (m < LEAST_M || m > MOST_M || (m & (m - 1)) != 0))
        return false;
    return geometry->k >= 1 && columns <= MOST_COLUMNS && geometry->depth >= 1 && geometry->depth <= MOST_DEPTH
        && columns * geometry->depth <= MOST_SHEET_BLOCKS;
}

uint32_t firn_sheet_full_data(const struct firn_sheet_geometry *geometry)
{
    return (uint32_t)geometry->k * geometry->depth;
}

uint32_t firn_sheet_full_blocks(const struct firn_sheet_geometry *geometry)
{
    return ((uint32_t)geometry->k + geometry->m) * geometry->depth;
}

static uint32_t divide_up(uint32_t a, uint32_t b)
{
    return (a + b - 1) / b;
}

/* The largest m whose rows can be filled without going more than a quarter beyond the reserve that is wanted. */
static uint32_t short_m(uint32_t m, uint32_t wanted)
{
    while (m > LEAST_M && m * divide_up(wanted, m) > wanted + wanted / 4)
        m /= 2;
    return m;
}

enum firn_status firn_sheet_shape_of(const struct firn_sheet_geometry *geometry, uint32_t data_blocks,
                                     struct firn_sheet_shape *shape)
{
    uint32_t k = geometry->k, m = geometry->m, rows = geometry->depth, wanted;

    if (!firn_sheet_geometry_valid(geometry) || data_blocks < 1 || data_blocks > k * rows)
        return FIRN_BAD_ARGUMENT;
    if (data_blocks < k * rows) {
        if (m == 0) {
            rows = divide_up(data_blocks, k);
        } else {
            wanted = divide_up(data_blocks * m, k);
            wanted = wanted < LEAST_M ? LEAST_M : wanted;
            m = short_m(m, wanted);
            rows = divide_up(wanted, m);
        }
        k = divide_up(data_blocks, rows);
    }
    *shape = (struct firn_sheet_shape){ data_blocks, m * rows, rows, k, m };
    return FIRN_OK;
}

/* The largest usual m for which the k that comes nearest to percent fits beside it. */
static void choose_columns(double percent, unsigned *k, unsigned *m)
{
    for (*m = USUAL_M; *m > LEAST_M; *m /= 2)
        if (100.0 * *m / percent + 0.5 < MOST_COLUMNS + 1 - *m)
            break;
    *k = MOST_COLUMNS - *m;
    if (100.0 * *m / percent + 0.5 < *k)
        *k = (unsigned)(100.0 * *m / percent + 0.5);
}

enum firn_status firn_sheet_geometry_for(double percent, uint64_t sheet_bytes, struct firn_sheet_geometry *geometry)
{
    unsigned k = K_WITHOUT_RESERVE, m = 0;
    uint64_t depth, most;

    if (!(percent >= 0 && percent <= 100))
        return FIRN_BAD_ARGUMENT;
    if (percent > 0)
        choose_columns(percent, &k, &m);
    depth = sheet_bytes / FIRN_BLOCK_BYTES / (k + m);
    most = MOST_SHEET_BLOCKS / (k + m);
    most = most < MOST_DEPTH ? most : MOST_DEPTH;
    depth = depth < 1 ? 1 : depth > most ? most : depth;
    *geometry = (struct firn_sheet_geometry){ (uint8_t)k, (uint8_t)m, (uint16_t)depth };
    return FIRN_OK;
}

/*
 * Rows go on being counted through from data to reserve, so a run of lost blocks is fair to all rows across that border
 * too.
 */
uint32_t firn_sheet_index(const struct firn_sheet_shape *shape, uint32_t row, unsigned column)
{
    const uint32_t rows = shape->rows, first_row = shape->data_blocks % rows;      /* of the first reserve block */
    uint32_t index;

    if (column >= shape->k)
        return shape->data_blocks + (column - shape->k) * rows + (row + rows - first_row) % rows;
    index = column * rows + row;
    return index < shape->data_blocks ? index : UINT32_MAX;
}
