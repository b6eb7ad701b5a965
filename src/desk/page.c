/* desk/page.c - words, numbers and dates in a page of HTML */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "desk/page.h"

#include "base/text.h"

#include <time.h>

enum { WORDS_ROOM = 32768 };

void firn_page_words(FILE *out, const char *words)
{
    char name[WORDS_ROOM];
    struct firn_text text;

    firn_text_start(&text, name, sizeof name);
    firn_text_add_name(&text, words);
    for (const char *at = name; *at != '\0'; at++)
        switch (*at) {
        case '&': fputs("&amp;", out); break;
        case '<': fputs("&lt;", out); break;
        case '>': fputs("&gt;", out); break;
        case '"': fputs("&quot;", out); break;
        case '\'': fputs("&#39;", out); break;
        default: fputc(*at, out);
        }
}

void firn_page_count(FILE *out, uint64_t count)
{
    char words[FIRN_TEXT_COUNT_ROOM];

    firn_text_count(count, words);
    for (const char *at = words; *at != '\0'; at++)
        if (*at == ' ')
            fputs("&#8239;", out);      /* narrow no-break space */
        else
            fputc(*at, out);
}

void firn_page_counted(FILE *out, uint64_t count, const char *one, const char *many)
{
    firn_page_count(out, count);
    fprintf(out, "&nbsp;%s", count == 1 ? one : many);
}

void firn_page_size(FILE *out, uint64_t bytes)
{
    char words[FIRN_TEXT_SIZE_ROOM];

    firn_text_size(bytes, words);
    for (const char *at = words; *at != '\0'; at++)
        fputs(*at == ' ' ? "&nbsp;" : (char[]){ *at, '\0' }, out);
}

static void put_time(FILE *out, int64_t seconds, const char *format)
{
    time_t when = (time_t)seconds;
    char words[40] = "";
    struct tm utc;

    if (gmtime_r(&when, &utc) != NULL)
        strftime(words, sizeof words, format, &utc);
    fputs(words, out);
}

void firn_page_time(FILE *out, int64_t seconds)
{
    fputs("<time datetime=\"", out);
    put_time(out, seconds, "%Y-%m-%dT%H:%M:%SZ");
    fputs("\">", out);
    put_time(out, seconds, "%Y-%m-%d&nbsp;%H:%M&nbsp;UTC");
    fputs("</time>", out);
}

void firn_page_day(FILE *out, int64_t seconds)
{
    put_time(out, seconds, "%Y-%m-%d");
}
