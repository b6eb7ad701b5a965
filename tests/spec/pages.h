/*
 * tests/spec/pages.h - reads worked examples and tables out of the pages of format-spec/, and vectors
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_TESTS_SPEC_PAGES_H
#define FIRN_TESTS_SPEC_PAGES_H

#include <ctype.h>
#include <stdbool.h>
#include <stdint.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

/* A page or a file of vectors, whole, ended by a NUL; freed by the caller. NULL when it is not there. */
static inline char *pages_read(const char *name)
{
    enum { ROOM = 1 << 20 };
    char path[1000], *text = malloc(ROOM);
    FILE *file;
    size_t used;

    snprintf(path, sizeof path, "%s/format-spec/%s", FIRN_SOURCE_DIR, name);
    file = fopen(path, "rb");
    if (file == NULL || text == NULL) {
        free(text);
        if (file != NULL)
            fclose(file);
        return NULL;
    }
    used = fread(text, 1, ROOM - 1, file);
    text[used] = '\0';
    fclose(file);
    return text;
}

/* Hexadecimal from `at`, blanks in it ignored, to the first character that is neither. How many bytes. */
static inline size_t pages_hex(const char *at, uint8_t *bytes, size_t room)
{
    size_t count = 0;

    for (;;) {
        unsigned value;

        while (*at == ' ')
            at++;
        if (!isxdigit((unsigned char)at[0]) || !isxdigit((unsigned char)at[1]) || count == room ||
            sscanf(at, "%2x", &value) != 1)
            return count;
        bytes[count++] = (uint8_t)value;
        at += 2;
    }
}

/* The bytes behind the first line of `text` that begins with `label`. */
static inline size_t pages_labelled(const char *text, const char *label, uint8_t *bytes, size_t room)
{
    for (const char *line = text; line != NULL; line = strchr(line, '\n')) {
        line += *line == '\n';
        if (strncmp(line, label, strlen(label)) == 0)
            return pages_hex(line + strlen(label), bytes, room);
    }
    return 0;
}

/*
 * Numbers of one row of a table, "| 1 | 2 .. 3 | ...": the first number of each cell, or -1 where there is none. How
 * many cells.
 */
static inline size_t pages_row(const char *line, long *numbers, size_t room)
{
    size_t count = 0;

    while (*line == '|' && line[1] != '\n' && line[1] != '\0' && count < room) {
        line++;
        numbers[count] = -1;
        for (; *line != '|' && *line != '\n' && *line != '\0'; line++)
            if (numbers[count] < 0 && isdigit((unsigned char)*line))
                numbers[count] = strtol(line, NULL, 10);
        count++;
    }
    return count;
}

#endif
