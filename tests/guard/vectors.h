/*
 * tests/guard/vectors.h - reads the worked examples of format-spec/vectors: lines "name: hex", blanks in the hex
 * ignored
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_TESTS_GUARD_VECTORS_H
#define FIRN_TESTS_GUARD_VECTORS_H

#include "base/text.h"

#include <stdio.h>
#include <string.h>

/*
 * The bytes of the vector `name` of format-spec/vectors/FILE, at most `room`; returns their count, 0 if there is none.
 */
static inline size_t vectors_read(const char *file, const char *name, uint8_t *bytes, size_t room)
{
    static char line[20000];
    char path[1000];
    size_t count = 0;
    FILE *stream;

    snprintf(path, sizeof path, "%s/format-spec/vectors/%s", FIRN_SOURCE_DIR, file);
    stream = fopen(path, "r");
    if (stream == NULL)
        return 0;
    while (count == 0 && fgets(line, sizeof line, stream) != NULL) {
        size_t length = strlen(name);
        const char *at = line + length + 1;

        if (strncmp(line, name, length) != 0 || line[length] != ':')
            continue;
        for (at += strspn(at, " \n"); *at != '\0' && count < room; at += 2 + strspn(at + 2, " \n"))
            if (firn_text_parse_hex(at, 1, &bytes[count++]) != FIRN_OK) {
                count = 0;
                break;
            }
    }
    fclose(stream);
    return count;
}

#endif
