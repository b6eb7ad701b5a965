/* desk/json.c - strings as JSON says them */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "desk/json.h"

#include "base/text.h"

enum { WORDS_ROOM = 32768 };      /* a name of 4095 bytes can become six times as long */

bool firn_json_string(FILE *out, const char *words)
{
    char buffer[WORDS_ROOM];
    struct firn_text text;
    bool exact;

    firn_text_start(&text, buffer, sizeof buffer);
    exact = firn_text_add_json(&text, words);
    fputs(buffer, out);
    return exact;
}
