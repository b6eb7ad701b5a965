/*
 * container/walk.h - items and content brought together
 *
 * Room: container. The engine under firn_reader_walk.
 *
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_CONTAINER_WALK_H
#define FIRN_CONTAINER_WALK_H

#include "container/decoder.h"
#include "container/parts.h"
#include "firn/reader.h"

/* Goes through all parts from the first. Fills in items, index_parts_lost of the report. */
enum firn_status firn_walk(struct firn_parts *parts, struct firn_decoder *decoder, const struct firn_memory *memory,
                           const struct firn_reader_visitor *visitor, struct firn_reader_walk_report *report);

#endif
