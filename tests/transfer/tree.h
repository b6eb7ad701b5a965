/*
 * tests/transfer/tree.h - two folders compared, and folders made for comparing
 *
 * Knows nothing of the transfer room: plain POSIX calls and the kernel's attributes.
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_TESTS_TREE_H
#define FIRN_TESTS_TREE_H

#include <stdbool.h>
#include <stddef.h>
#include <sys/types.h>

enum { TREE_ANY_OWNER = 1, TREE_ANY_MODE = 2, TREE_ANY_HOLES = 4 };      /* what may differ */

/*
 * How many things differ between what lies below two folders (not the folders themselves): names, types, modes, owners,
 * times of modification, sizes, bytes, link targets, device numbers, names of one file, attributes and lists, holes.
 * Each is said on standard error.
 */
unsigned tree_differences(const char *one, const char *other, unsigned may_differ);

/* Small things that stop the program when they fail. */
void tree_folder(const char *path, mode_t mode);
void tree_file(const char *path, const void *bytes, size_t count, mode_t mode);
void tree_pattern(const char *path, size_t count, unsigned seed);      /* a file of bytes that do not repeat */
void tree_time(const char *path, long long seconds, long nanoseconds);

/* A folder with one of everything in it; as root devices, owners and capabilities too. */
void tree_of_everything(const char *path);

#endif
