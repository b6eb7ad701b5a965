/*
 * desk/json.h - strings as JSON says them, straight into a stream
 *
 * Room: desk. RFC 8259.
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_DESK_JSON_H
#define FIRN_DESK_JSON_H

#include <stdbool.h>
#include <stdio.h>

/* With its quotes. False: it is no UTF-8, and what is none came out as U+FFFD. */
bool firn_json_string(FILE *out, const char *words);

#endif
