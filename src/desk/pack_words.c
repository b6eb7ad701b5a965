/* desk/pack_words.c - what the words of pack ask of the container */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "desk/pack_words.h"

#include "desk/trouble.h"

#include <stdlib.h>
#include <string.h>
#include <sys/random.h>
#include <time.h>

static int read_reserve(const struct firn_pack_words *given, struct firn_writer_options *writing,
                        struct firn_view *view)
{
    const char *words = given->reserve, *sheet = given->sheet;
    uint64_t sheet_bytes = UINT64_C(128) << 20;
    double percent = 14.3;
    char *end;

    if (words != NULL) {
        percent = strtod(words, &end);
        if (end == words || (*end != '\0' && strcmp(end, "%") != 0) || !(percent >= 0 && percent <= 100))
            return firn_trouble_usage(view, words, "is no percentage from 0 to 100");
    }
    if (sheet != NULL && firn_text_parse_size(sheet, &sheet_bytes) != FIRN_OK)
        return firn_trouble_usage(view, sheet, "is no size such as 128MiB");
    if (firn_sheet_geometry_for(percent, sheet_bytes, &writing->geometry) != FIRN_OK)
        return firn_trouble_usage(view, sheet != NULL ? sheet : words,
                                  "makes no sheet; it is too small or too large");
    if (sheet_bytes < (UINT64_C(1) << 20) || sheet_bytes > (UINT64_C(256) << 20))
        return firn_trouble_usage(view, sheet, "is no size of a sheet: 1MiB to 256MiB");
    if (writing->geometry.m == 0)
        firn_view_finding(view, "no-reserve", given->output, "packed WITHOUT a reserve: a lost block will stay lost");
    return FIRN_EXIT_SOUND;
}

static int read_effort(const char *word, struct firn_writer_options *writing, struct firn_view *view)
{
    static const struct { const char *word; enum firn_segment_effort effort; } efforts[] = {
        { "none", FIRN_SEGMENT_EFFORT_NONE }, { "quick", FIRN_SEGMENT_EFFORT_QUICK },
        { "normal", FIRN_SEGMENT_EFFORT_NORMAL }, { "thorough", FIRN_SEGMENT_EFFORT_THOROUGH }
    };

    writing->effort = FIRN_SEGMENT_EFFORT_NORMAL;
    if (word == NULL)
        return FIRN_EXIT_SOUND;
    for (size_t i = 0; i < sizeof efforts / sizeof efforts[0]; i++)
        if (strcmp(word, efforts[i].word) == 0) {
            writing->effort = efforts[i].effort;
            return FIRN_EXIT_SOUND;
        }
    return firn_trouble_usage(view, word, "is no effort: none, quick, normal or thorough");
}

/* With SOURCE_DATE_EPOCH the same input gives the same bytes: no clock, no chance (reproducible-builds.org). */
static int read_date(struct firn_writer_options *writing, struct firn_view *view)
{
    const char *words = getenv("SOURCE_DATE_EPOCH");
    uint64_t seconds;

    if (words == NULL || *words == '\0') {
        writing->title.date = (int64_t)time(NULL);
        if (getrandom(writing->nonce, sizeof writing->nonce, 0) != (ssize_t)sizeof writing->nonce) {
            firn_view_finding(view, "no-random", "",
                              "the system gives no random bytes for the container's identity");
            return FIRN_EXIT_OS;
        }
        return FIRN_EXIT_SOUND;
    }
    if (firn_text_parse_count(words, &seconds) != FIRN_OK || seconds > INT32_MAX * UINT64_C(100))
        return firn_trouble_usage(view, words, "is no number of seconds in SOURCE_DATE_EPOCH");
    writing->title.date = (int64_t)seconds;
    return FIRN_EXIT_SOUND;
}

int firn_pack_words(const struct firn_pack_words *words, struct firn_writer_options *writing, struct firn_view *view)
{
    int exit = read_reserve(words, writing, view);

    if (exit == FIRN_EXIT_SOUND)
        exit = read_effort(words->effort, writing, view);
    return exit == FIRN_EXIT_SOUND ? read_date(writing, view) : exit;
}
