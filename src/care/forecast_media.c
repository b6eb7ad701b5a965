/*
 * care/forecast_media.c - media profiles as plain text
 * SPDX-License-Identifier: BSD-2-Clause
 */
#include "firn/forecast.h"

#include "base/fault.h"
#include "base/text.h"

#include <math.h>
#include <stdlib.h>
#include <string.h>

enum figure { FLIPS, RUNS, RUN_LENGTH, LOSS, READ_ERRORS };

enum { LINE_ROOM = 512, LEAST_RUN_BYTES = 512 };

static const char *const names[FIRN_FORECAST_FIGURES] = {
    [FLIPS] = "flips", [RUNS] = "runs", [RUN_LENGTH] = "run-length", [LOSS] = "loss", [READ_ERRORS] = "read-errors"
};

const char *firn_forecast_figure_name(unsigned figure)
{
    return figure < FIRN_FORECAST_FIGURES ? names[figure] : "";
}

double *firn_forecast_figure(struct firn_forecast_medium *medium, unsigned figure)
{
    switch (figure) {
    case FLIPS:       return &medium->flips;
    case RUNS:        return &medium->runs;
    case RUN_LENGTH:  return &medium->run_bytes;
    case LOSS:        return &medium->loss;
    case READ_ERRORS: return &medium->read_errors;
    }
    return NULL;
}

bool firn_forecast_figure_valid(unsigned figure, double value)
{
    if (!isfinite(value) || value < 0)
        return false;
    /* 1e15: a petabyte in a run, or more runs a year than anything survives; what is beyond it is a slip */
    return value <= 1e15 && (figure != RUN_LENGTH || value >= LEAST_RUN_BYTES) && (figure != READ_ERRORS || value <= 1);
}

void firn_forecast_media_start(struct firn_forecast_media *media, const char *text, size_t bytes)
{
    *media = (struct firn_forecast_media){ .text = text, .bytes = bytes };
}

/* Takes the next line that says something, without blanks around it. False at the end; wrong says what a line has. */
static bool take_line(struct firn_forecast_media *media, char line[LINE_ROOM], const char **wrong)
{
    *wrong = NULL;
    while (media->at < media->bytes) {
        const char *from = media->text + media->at, *end = memchr(from, '\n', media->bytes - media->at);
        size_t count = end == NULL ? media->bytes - media->at : (size_t)(end - from);

        media->at += count + (end != NULL);
        media->line++;
        for (; count > 0 && (*from == ' ' || *from == '\t'); count--)
            from++;
        while (count > 0 && (from[count - 1] == ' ' || from[count - 1] == '\t' || from[count - 1] == '\r'))
            count--;
        if (count == 0 || *from == '#')
            continue;
        for (size_t i = 0, step; i < count && *wrong == NULL; i += step) {
            step = firn_text_utf8(from + i, count - i);
            if (step == 0 || (uint8_t)from[i] < 0x20 || from[i] == 0x7F) {
                *wrong = "is no plain UTF-8 text";
                step = 1;
            }
        }
        if (count >= LINE_ROOM)
            *wrong = "is longer than 511 bytes";
        if (*wrong != NULL)
            return true;
        memcpy(line, from, count);
        line[count] = '\0';
        return true;
    }
    return false;
}

/* Cuts the first word off; returns what is behind it. */
static char *cut_word(char *line)
{
    char *end = line + strcspn(line, " \t");

    if (*end == '\0')
        return end;
    *end++ = '\0';
    return end + strspn(end, " \t");
}

static bool put_words(char words[FIRN_FORECAST_WORDS_ROOM], const char *from)
{
    size_t count = strlen(from);

    if (count == 0 || count >= FIRN_FORECAST_WORDS_ROOM)
        return false;
    memcpy(words, from, count + 1);
    return true;
}

static bool read_value(unsigned figure, const char *words, double *value)
{
    uint64_t bytes;
    char *end;

    if (figure == RUN_LENGTH) {
        if (firn_text_parse_size(words, &bytes) != FIRN_OK)
            return false;
        *value = (double)bytes;
    } else {
        if ((*words < '0' || *words > '9') && *words != '.')      /* no sign, no name of a number, no hexadecimal */
            return false;
        if (strspn(words, "0123456789.eE+-") != strlen(words))
            return false;
        *value = strtod(words, &end);
        if (*end != '\0')
            return false;
    }
    return firn_forecast_figure_valid(figure, *value);
}

/* A line "FIGURE VALUE SOURCE". Returns what is wrong with it, or NULL. */
static const char *read_figure(struct firn_forecast_profile *profile, const char *word, char *rest)
{
    char *source = cut_word(rest);

    for (unsigned figure = 0; figure < FIRN_FORECAST_FIGURES; figure++) {
        if (strcmp(word, names[figure]) != 0)
            continue;
        if (profile->given[figure])
            return "gives a figure for the second time";
        if (!read_value(figure, rest, firn_forecast_figure(&profile->medium, figure)))
            return figure == RUN_LENGTH ? "wants a length from 512 bytes on, such as 64KiB"
                                        : "wants a rate such as 1e-9";
        if (!put_words(profile->sources[figure], source))
            return "must say where its figure comes from, in at most 239 bytes";
        profile->given[figure] = true;
        profile->assumed[figure] = strncmp(source, "assumed", strlen("assumed")) == 0;
        return NULL;
    }
    return "begins with no word known here: medium, about, flips, runs, run-length, loss, read-errors";
}

static const char *read_line(struct firn_forecast_profile *profile, char *line)
{
    char *rest = cut_word(line);

    if (strcmp(line, "about") == 0)
        return put_words(profile->about, rest) ? NULL : "wants a few words, at most 239 bytes";
    return read_figure(profile, line, rest);
}

static const char *read_head(struct firn_forecast_profile *profile, char *line)
{
    char *name = cut_word(line);
    size_t count = strlen(name);

    if (strcmp(line, "medium") != 0)
        return "stands before the first 'medium NAME'";
    if (count == 0 || count >= FIRN_FORECAST_NAME_ROOM || strcspn(name, " \t") != count)
        return "wants a name of one word, at most 39 bytes";
    memcpy(profile->name, name, count + 1);
    return NULL;
}

static enum firn_status complain(const struct firn_forecast_media *media, const char *wrong, struct firn_fault *fault)
{
    char words[sizeof fault->what];
    struct firn_text text;

    firn_text_start(&text, words, sizeof words);
    firn_text_add(&text, "line %u %s", media->line, wrong);
    return firn_fault_tell(fault, FIRN_BAD_DATA, 0, 0, words);
}

enum firn_status firn_forecast_media_next(struct firn_forecast_media *media, struct firn_forecast_profile *profile,
                                          struct firn_fault *fault)
{
    char line[LINE_ROOM];
    const char *wrong;

    *profile = (struct firn_forecast_profile){ .medium.run_bytes = LEAST_RUN_BYTES };
    if (!take_line(media, line, &wrong))
        return FIRN_END;
    if (wrong == NULL)
        wrong = read_head(profile, line);
    for (;;) {
        struct firn_forecast_media before = *media;

        if (wrong != NULL)
            return complain(media, wrong, fault);
        if (!take_line(media, line, &wrong))
            return FIRN_OK;
        if (wrong == NULL && strncmp(line, "medium", 6) == 0 && strcspn(line, " \t") == 6) {
            *media = before;
            return FIRN_OK;
        }
        if (wrong == NULL)
            wrong = read_line(profile, line);
    }
}
