/*
 * tests/spec/carried.h - the carried reader, for tests that look into it
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_TESTS_SPEC_CARRIED_H
#define FIRN_TESTS_SPEC_CARRIED_H

int carried_main(int count, char **words);
#define main carried_main
#include "../../format-spec/reader.c"
#undef main

#endif
