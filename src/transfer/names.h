/*
 * transfer/names.h - a growing set of byte strings, each with a record of its own
 *
 * Room: transfer. Nothing is taken out again. Records and keys keep their place in memory until the set is freed.
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_TRANSFER_NAMES_H
#define FIRN_TRANSFER_NAMES_H

#include "firn/memory.h"

#include <stdbool.h>
#include <stddef.h>

struct firn_names;

enum firn_status firn_names_make(const struct firn_memory *memory, size_t record_bytes, struct firn_names **out);
void firn_names_free(struct firn_names *names);      /* takes NULL */

/* The record of a key, or NULL. */
void *firn_names_find(const struct firn_names *names, const void *key, size_t key_bytes);

/*
 * The record of a key; a new one is zeroed. fresh (may be NULL) tells which. The key is copied, with a NUL behind it.
 * FIRN_OK or FIRN_NO_MEMORY.
 */
enum firn_status firn_names_add(struct firn_names *names, const void *key, size_t key_bytes, void **record,
                                bool *fresh);

size_t firn_names_count(const struct firn_names *names);

/* Key and record number `index` in the order of adding. */
void *firn_names_at(const struct firn_names *names, size_t index, const char **key);

/* A copy of bytes that lives as long as the set, with a NUL behind it; NULL when memory is out. */
char *firn_names_keep(struct firn_names *names, const char *bytes, size_t count);

#endif
