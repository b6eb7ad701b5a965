/* desk/scrub_page.c - a scrub as a page */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "desk/scrub_page.h"

#include "desk/page.h"
#include "desk/page_core.h"
#include "desk/page_trend.h"
#include "desk/staged.h"

#include <inttypes.h>
#include <string.h>
#include <time.h>

struct page {
    const struct firn_scrub_turn *turns;
    size_t count;
};

/* Worst first: the order of the table and of the cores. */
enum verdict { LOST, FAILED, GROWING, LEFT, REBUILT, MENDED, UNKNOWN, SOUND, VERDICTS };

/* What the badge of one says, and how many of them are told of; the signs are a cross, an arrow, circles filling up. */
static const struct { const char *words, *counted, *style, *sign; } verdicts[VERDICTS] = {
    [LOST] = { "bytes lost", "with bytes lost", "lost", "\xE2\x9C\x95" },
    [FAILED] = { "could not be looked at", "not to be looked at", "lost", "?" },
    [GROWING] = { "damage comes faster", "damaged faster than before", "lost", "\xE2\x86\x97" },
    [LEFT] = { "damaged, not repaired", "damaged and not repaired", "damaged", "\xE2\x97\x91" },
    [REBUILT] = { "rebuilt and repaired", "rebuilt and repaired", "damaged", "\xE2\x97\x91" },
    [MENDED] = { "mended", "mended", "damaged", "\xE2\x97\x94" },
    [UNKNOWN] = { "not gone through yet", "not gone through yet", "waits", "\xE2\x80\xA6" },
    [SOUND] = { "sound", "sound", "sound", "\xE2\x97\x8B" },
};

static const struct firn_history_entry *newest_of(const struct firn_scrub_turn *turn)
{
    const struct firn_history *history = turn->history;

    return history == NULL || history->count == 0 ? NULL : &history->entries[history->count - 1];
}

/* Several may hold of one container. */
static bool holds(const struct firn_scrub_turn *turn, enum verdict verdict)
{
    const struct firn_history_entry *newest = newest_of(turn);

    switch (verdict) {
    case LOST:    return newest != NULL && (newest->lost > 0 || newest->end_missing);
    case FAILED:  return turn->tried && turn->status != FIRN_OK;
    case GROWING: return newest != NULL && firn_history_trend(turn->history).grows;
    case LEFT:    return newest != NULL && newest->left > 0 && newest->lost == 0;
    case REBUILT: return newest != NULL && newest->rebuilt > 0;
    case MENDED:  return newest != NULL && (newest->mended > 0 || newest->title_damaged);
    case UNKNOWN: return newest == NULL || firn_history_last_done(turn->history) == 0;
    default:      return true;
    }
}

/* The worst that holds. */
static enum verdict judge(const struct firn_scrub_turn *turn)
{
    unsigned verdict = LOST;

    while (!holds(turn, (enum verdict)verdict))
        verdict++;
    return (enum verdict)verdict;
}

static const char *name_of(const char *path)
{
    const char *slash = strrchr(path, '/');

    return slash == NULL || slash[1] == '\0' ? path : slash + 1;
}

/* ---- what needs attention ---- */

static void put_trouble(FILE *out, const struct firn_scrub_turn *turn, enum verdict verdict)
{
    const struct firn_history_entry *newest = newest_of(turn);
    struct firn_trend trend;
    char words[200];
    struct firn_text text;

    firn_text_start(&text, words, sizeof words);
    switch (verdict) {
    case LOST:
        if (newest->lost > 0) {
            firn_page_counted(out, newest->lost, "block is lost", "blocks are lost");
            fputs(newest->end_missing ? ", and its end is missing" : "", out);
        } else {
            fputs("Its end is missing", out);
        }
        break;
    case FAILED:
        fputs("It could not be looked at: ", out);
        firn_page_words(out, firn_status_text(turn->status));
        break;
    case GROWING:
        trend = firn_history_trend(turn->history);
        fputs("Damage comes faster: ", out);
        firn_scrub_turn_trend_words(&trend, &text);
        firn_page_words(out, words);
        break;
    case LEFT:
        firn_page_counted(out, newest->places, "damaged place was", "damaged places were");
        fputs(" found and not repaired", out);
        break;
    case REBUILT:
        firn_page_counted(out, newest->rebuilt, "block", "blocks");
        fputs(" had to come from the reserve", out);
        if (newest->unreadable > 0) {
            fputs("; the medium gave no answer for ", out);
            firn_page_count(out, newest->unreadable);
        }
        break;
    default:
        break;
    }
    fputc('.', out);
}

static const char *what_to_do(enum verdict verdict)
{
    switch (verdict) {
    case LOST:    return "Take another copy before anything is written here. What is lost and what is left, "
                         "\xE2\x80\x9C" "firn restore\xE2\x80\x9D tells file by file.";
    case FAILED:  return "Check the name, your rights, and the medium.";
    case GROWING: return "Copy this medium now, and check the copy.";
    case LEFT:    return "If this is the only copy, copy it first; then scrub without "
                         "<code>--report-only</code>.";
    case REBUILT: return "Every byte is safe. Look again soon, and see that the other copies are well.";
    default:      return "";
    }
}

static size_t count_of(const struct page *page, enum verdict verdict)
{
    size_t count = 0;

    for (size_t i = 0; i < page->count; i++)
        count += judge(&page->turns[i]) == verdict;
    return count;
}

static void put_attention(FILE *out, const struct page *page)
{
    size_t troubles = 0;

    for (size_t i = 0; i < page->count; i++)
        troubles += judge(&page->turns[i]) <= REBUILT;
    fputs("<section id=\"attention\">\n<h2>What needs attention</h2>\n", out);
    if (troubles == 0) {
        fputs("<p class=\"calm\">Nothing. What was looked at is sound, or was mended.</p>\n</section>\n", out);
        return;
    }
    fputs("<table>\n<thead><tr><th>Container</th><th>What was found</th><th>What to do</th></tr></thead>\n"
          "<tbody>\n", out);
    for (unsigned verdict = LOST; verdict <= REBUILT; verdict++)
        for (size_t i = 0; i < page->count; i++) {
            const struct firn_scrub_turn *turn = &page->turns[i];

            if (!holds(turn, (enum verdict)verdict))
                continue;
            fprintf(out, "<tr><th scope=\"row\"><a href=\"#c%zu\">", i);
            firn_page_words(out, name_of(turn->path));
            fputs("</a></th><td>", out);
            put_trouble(out, turn, (enum verdict)verdict);
            fprintf(out, "</td><td>%s</td></tr>\n", what_to_do((enum verdict)verdict));
        }
    fputs("</tbody>\n</table>\n</section>\n", out);
}

/* ---- one container ---- */

static void put_fact(FILE *out, const char *label, uint64_t count, const char *one, const char *many)
{
    if (count == 0)
        return;
    fprintf(out, "<dt>%s</dt><dd>", label);
    firn_page_counted(out, count, one, many);
    fputs("</dd>\n", out);
}

static void put_facts(FILE *out, const struct firn_scrub_turn *turn, const struct firn_history_entry *newest)
{
    int64_t done = firn_history_last_done(turn->history);

    fputs("<dl>\n<dt>size</dt><dd>", out);
    firn_page_size(out, newest->file_bytes);
    fputs(", ", out);
    firn_page_counted(out, newest->blocks, "block", "blocks");
    fputs("</dd>\n<dt>gone through</dt><dd>", out);
    if (done == 0)
        fputs("never to its end", out);
    else
        firn_page_time(out, done);
    fputs("</dd>\n", out);
    put_fact(out, "mended", newest->mended, "block", "blocks");
    put_fact(out, "stray bits", newest->mended_bits, "bit", "bits");
    put_fact(out, "rebuilt", newest->rebuilt, "block", "blocks");
    put_fact(out, "unreadable", newest->unreadable, "block", "blocks");
    put_fact(out, "LOST", newest->lost, "block", "blocks");
    if (newest->title_damaged)
        fputs("<dt>title page</dt><dd>was damaged</dd>\n", out);
    fputs("<dt>identity</dt><dd><code>", out);
    for (size_t i = 0; i < sizeof newest->id; i++)
        fprintf(out, "%02x", (unsigned)newest->id[i]);
    fputs("</code></dd>\n</dl>\n", out);
}

static void put_container(FILE *out, const struct firn_scrub_turn *turn, size_t index, enum verdict verdict)
{
    const struct firn_history_entry *newest = newest_of(turn);

    fprintf(out, "<article id=\"c%zu\">\n<div class=\"top\"><div><h3>", index);
    firn_page_words(out, name_of(turn->path));
    fputs("</h3><p class=\"place\">", out);
    firn_page_words(out, turn->path);
    fprintf(out, "</p></div><span class=\"verdict %s\">%s %s</span></div>\n", verdicts[verdict].style,
            verdicts[verdict].sign, verdicts[verdict].words);
    if (newest != NULL) {
        firn_page_core(out, turn->history);
        if (holds(turn, GROWING))
            fputs("<p class=\"warning\">Damage comes faster than it used to. Copy this medium now.</p>\n", out);
        fputs("<div class=\"pair\">\n", out);
        put_facts(out, turn, newest);
        firn_page_trend(out, turn->history);
        fputs("</div>\n", out);
    }
    fputs("</article>\n", out);
}

static void put_shelf(FILE *out, const struct page *page)
{
    fputs("<section id=\"shelf\">\n<h2>The shelf</h2>\n", out);
    firn_page_core_legend(out);
    fputs("<p class=\"soft\">Each core is a container, drawn from its first block to its last as it was found; what is "
          "mended or rebuilt was put right unless it says otherwise. Peaks show how many blocks of a slice were "
          "damaged, each step of height twice as many.</p>\n<div class=\"shelf\">\n", out);
    for (unsigned verdict = LOST; verdict < VERDICTS; verdict++)
        for (size_t i = 0; i < page->count; i++)
            if (judge(&page->turns[i]) == verdict)
                put_container(out, &page->turns[i], i, (enum verdict)verdict);
    fputs("</div>\n</section>\n", out);
}

/* ---- the page ---- */

static void put_lead(FILE *out, const struct page *page)
{
    size_t waiting = 0;
    const char *before = ": ";

    for (size_t i = 0; i < page->count; i++)
        waiting += page->turns[i].waits;
    fputs("<p class=\"lead\">", out);
    firn_page_counted(out, page->count, "container", "containers");
    for (unsigned verdict = LOST; verdict < VERDICTS; verdict++) {
        size_t count = count_of(page, (enum verdict)verdict);

        if (count == 0)
            continue;
        fputs(before, out);
        firn_page_counted(out, count, verdicts[verdict].counted, verdicts[verdict].counted);
        before = ", ";
    }
    fputs(".", out);
    if (waiting > 0) {
        fputs(" The time of this run was up: ", out);
        firn_page_counted(out, waiting, "waits", "wait");
        fputs(" for the next.", out);
    }
    fputs("</p>\n<p class=\"soft\">Written ", out);
    firn_page_time(out, (int64_t)time(NULL));
    fputs(" by firn " FIRN_VERSION_TEXT "</p>\n", out);
}

static void write_all(void *self, FILE *out)
{
    const struct page *page = self;

    fputs("<!DOCTYPE html>\n<html lang=\"en\">\n<head>\n<meta charset=\"utf-8\">\n"
          "<meta name=\"viewport\" content=\"width=device-width, initial-scale=1\">\n"
          "<title>The state of the shelf</title>\n", out);
    firn_page_style(out);
    fputs("</head>\n<body>\n", out);
    firn_page_core_patterns(out);
    fputs("<header>\n<h1>The state of the shelf</h1>\n", out);
    put_lead(out, page);
    fputs("</header>\n<main>\n", out);
    put_attention(out, page);
    put_shelf(out, page);
    fputs("</main>\n<footer>\n<p class=\"soft\">A repair does not make a medium young again, and a page without "
          "warnings is no reason to trust one. Keep more than one copy, on different media, in different places; "
          "rehearse restoring. Your institution\xE2\x80\x99s policy and professional practice come before anything "
          "said here.</p>\n"
          "</footer>\n</body>\n</html>\n", out);
}

enum firn_status firn_scrub_page(const char *path, const struct firn_scrub_turn *turns, size_t count,
                                 struct firn_fault *fault)
{
    struct page page = { turns, count };

    return firn_staged_write(path, write_all, &page, fault);
}
