/*
 * container/carried.h - the two texts that a container carries for those who have no firn
 *
 * Room: container. Both are made from format-spec/ when the project is built (carried.cmake): the pages and vectors of
 * the specification, one behind the other, and the source of the reader.
 *
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_CONTAINER_CARRIED_H
#define FIRN_CONTAINER_CARRIED_H

#include <stddef.h>
#include <stdint.h>

extern const uint8_t firn_carried_specification[], firn_carried_reader[];
extern const size_t firn_carried_specification_bytes, firn_carried_reader_bytes;

#endif
