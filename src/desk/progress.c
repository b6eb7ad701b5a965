/* desk/progress.c - how far it is, on a terminal only */
/* SPDX-License-Identifier: BSD-2-Clause */
#define _DEFAULT_SOURCE      /* TIOCGWINSZ */
#include "desk/progress.h"

#include "base/text.h"

#include <stdio.h>
#include <string.h>
#include <sys/ioctl.h>
#include <time.h>
#include <unistd.h>

static double now(void)
{
    struct timespec time;

    clock_gettime(CLOCK_MONOTONIC, &time);
    return (double)time.tv_sec + (double)time.tv_nsec / 1e9;
}

void firn_progress_start(struct firn_progress *progress, const char *doing, uint64_t goal_bytes, bool quiet)
{
    *progress = (struct firn_progress){ .doing = doing, .goal_bytes = goal_bytes };
    progress->shown = !quiet && isatty(STDERR_FILENO) == 1;
    progress->began = progress->last = now();
}

/* A line that wraps could not be wiped: it is cut to what the terminal shows, less the last column. ASCII alone. */
static void fit(char *words)
{
#ifdef TIOCGWINSZ
    struct winsize window;

    if (ioctl(STDERR_FILENO, TIOCGWINSZ, &window) == 0 && window.ws_col > 1 && strlen(words) >= window.ws_col)
        words[window.ws_col - 1] = '\0';
#else
    (void)words;
#endif
}

static void add_time(struct firn_text *text, double seconds)
{
    unsigned left = seconds < 1e6 ? (unsigned)(seconds + 0.5) : 1000000;

    if (left >= 3600)
        firn_text_add(text, ", %u h %02u min left", left / 3600, left / 60 % 60);
    else if (left >= 60)
        firn_text_add(text, ", %u min %02u s left", left / 60, left % 60);
    else
        firn_text_add(text, ", %u s left", left);
}

void firn_progress_step(struct firn_progress *progress, uint64_t items, uint64_t bytes)
{
    char words[160], size[FIRN_TEXT_SIZE_ROOM], count[FIRN_TEXT_COUNT_ROOM];
    struct firn_text text;
    double time, spent, rate;

    if (!progress->shown)
        return;
    time = now();
    if (time - progress->last < 0.2)
        return;
    progress->last = time;
    spent = time - progress->began;
    rate = (double)bytes / spent;
    firn_text_start(&text, words, sizeof words);
    firn_text_add(&text, "%s: ", progress->doing);
    if (items > 0)
        firn_text_add(&text, items == 1 ? "%s item, " : "%s items, ", firn_text_count(items, count));
    firn_text_add(&text, "%s", firn_text_size(bytes, size));
    if (progress->goal_bytes > 0)
        firn_text_add(&text, " of %s", firn_text_size(progress->goal_bytes, size));
    firn_text_add(&text, ", %s/s", firn_text_size((uint64_t)rate, size));
    if (progress->goal_bytes > bytes && bytes > 0 && spent > 1)
        add_time(&text, (double)(progress->goal_bytes - bytes) / rate);
    fit(words);
    fprintf(stderr, "\r%s\033[K", words);
    fflush(stderr);
    progress->drawn = true;
}

void firn_progress_wipe(struct firn_progress *progress)
{
    if (!progress->drawn)
        return;
    fputs("\r\033[K", stderr);
    fflush(stderr);
    progress->drawn = false;
}
