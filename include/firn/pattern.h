/*
 * firn/pattern.h - choosing items by name
 *
 * Room: transfer. A word chooses the item of that very name and everything below it. A word with `*`, `?` or `[` is a
 * shell pattern too (fnmatch of POSIX.1-2008): without a slash it is held against every single component of a name,
 * with a slash against the name and each folder above it, component by component, so that `*` and `?` never stand for a
 * slash. A folder that is chosen brings everything below it. A leading dot is nothing special. `?` stands for a letter
 * of UTF-8 or for a single byte, whatever the locale.
 *
 * Words are brought into the form of stored names first (firn/intake.h): `/usr/share/`, `./usr/share` and `usr/share`
 * are the same word. A word of which nothing remains, such as `.`, chooses everything.
 *
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_PATTERN_H
#define FIRN_PATTERN_H

#include "firn/memory.h"

#include <stdbool.h>
#include <stddef.h>

struct firn_pattern;      /* a list of words */

/* FIRN_OK; FIRN_NO_MEMORY; FIRN_BAD_ARGUMENT for a word longer than a name may be. The words are copied. */
FIRN_API enum firn_status firn_pattern_make(const char *const *words, size_t count, const struct firn_memory *memory,
                                            struct firn_pattern **out);
FIRN_API void firn_pattern_free(struct firn_pattern *pattern);      /* takes NULL */

/* Whether any word chooses this stored name, and remembers which did. For one thread at a time. */
FIRN_API bool firn_pattern_match(struct firn_pattern *pattern, const char *name);

/* Whether word `index` of those given to firn_pattern_make has chosen anything so far. */
FIRN_API bool firn_pattern_used(const struct firn_pattern *pattern, size_t index);

#endif
