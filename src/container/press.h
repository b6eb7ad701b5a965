/*
 * container/press.h - turns the stream into sheets of blocks in a store
 *
 * Room: container. Holds one sheet: its blocks can be sealed only when it is known how many they are.
 *
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_CONTAINER_PRESS_H
#define FIRN_CONTAINER_PRESS_H

#include "base/threads.h"
#include "firn/sheet.h"
#include "firn/store.h"

struct firn_press;

struct firn_press_options {
    struct firn_store *store;
    const struct firn_memory *memory;
    struct firn_threads *threads;          /* lent; idle whenever the press is called */
    struct firn_sheet_geometry geometry;
    const uint8_t *nonce;                  /* 16 bytes, lent for the call */
    const uint8_t *page;                   /* title page, 4096 bytes, lent for the call */
};

enum firn_status firn_press_make(const struct firn_press_options *options, struct firn_press **out);
void firn_press_free(struct firn_press *press);      /* takes NULL */

/* Where the next byte of the stream goes. */
uint64_t firn_press_at(const struct firn_press *press);

/* Appends to the stream. FIRN_OK, FIRN_IO with fault, FIRN_READ_ONLY. */
enum firn_status firn_press_put(struct firn_press *press, const uint8_t *bytes, size_t count, struct firn_fault *fault);
enum firn_status firn_press_put_zeros(struct firn_press *press, size_t count, struct firn_fault *fault);

struct firn_press_totals {
    uint64_t blocks, data_blocks, container_bytes;
    uint8_t id[8];
};

/* Writes the last sheet. The stream must not be empty. */
enum firn_status firn_press_finish(struct firn_press *press, struct firn_fault *fault,
                                   struct firn_press_totals *totals);

#endif
