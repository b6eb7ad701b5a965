/* desk/page_trend.c - damage over time, drawn */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "desk/page_trend.h"

#include "desk/page.h"

#include <string.h>

enum { WIDTH = 600, HEIGHT = 80, BASE = 74, BAR_MAX = 22, BAR_MIN = 3, TICK = 4 };

struct trend {
    const struct firn_history_entry *scrubs[FIRN_HISTORY_MAX];      /* whole ones of this container */
    size_t count;
    uint64_t most;                 /* places in one scrub */
    unsigned damaged;              /* scrubs that found any */
};

static struct trend gather(const struct firn_history *history)
{
    struct trend trend = { .count = 0 };

    for (size_t i = 0; i < history->count; i++) {
        const struct firn_history_entry *entry = &history->entries[i];

        if (!entry->done || memcmp(entry->id, history->entries[history->count - 1].id, sizeof entry->id) != 0)
            continue;
        trend.scrubs[trend.count++] = entry;
        trend.most = entry->places > trend.most ? entry->places : trend.most;
        trend.damaged += entry->places > 0;
    }
    return trend;
}

static double place_of(const struct trend *trend, size_t index, double bar)
{
    double first = (double)trend->scrubs[0]->at, span = (double)trend->scrubs[trend->count - 1]->at - first;

    return span > 0 ? ((double)trend->scrubs[index]->at - first) / span * (WIDTH - bar) : (WIDTH - bar) / 2;
}

static void put_bar(FILE *out, const struct trend *trend, size_t index, double bar)
{
    const struct firn_history_entry *scrub = trend->scrubs[index];
    double height = trend->most == 0 ? 0 : (double)scrub->places / (double)trend->most * (BASE - 4);
    double x = place_of(trend, index, bar);

    fputs("<g><title>", out);
    firn_page_day(out, scrub->at);
    fputs(": ", out);
    firn_page_counted(out, scrub->places, "damaged place", "damaged places");
    fputs("</title>", out);
    if (scrub->places > 0)
        fprintf(out, "<rect x=\"%.1f\" y=\"%.1f\" width=\"%.1f\" height=\"%.1f\" fill=\"%s\"/>", x,
                BASE - (height < 3 ? 3 : height), bar, height < 3 ? 3 : height,
                scrub->lost > 0 ? "#101418" : scrub->rebuilt > 0 ? "url(#rebuilt)" : "url(#mended)");
    fprintf(out, "<path d=\"M%.1f %dv%d\" stroke=\"#16242e\" vector-effect=\"non-scaling-stroke\"/></g>\n", x + bar / 2,
            BASE, TICK);
}

static void put_chart(FILE *out, const struct trend *trend)
{
    double bar = WIDTH / (2.0 * (double)trend->count);

    bar = bar > BAR_MAX ? BAR_MAX : bar < BAR_MIN ? BAR_MIN : bar;
    fprintf(out, "<svg viewBox=\"0 0 %d %d\" preserveAspectRatio=\"none\" role=\"img\">\n"
                 "<title>Damaged places in each of ", WIDTH, HEIGHT);
    firn_page_counted(out, trend->count, "scrub", "scrubs");
    fputs("</title>\n", out);
    fprintf(out, "<path d=\"M0 %dH%d\" stroke=\"#16242e\" vector-effect=\"non-scaling-stroke\"/>\n", BASE, WIDTH);
    for (size_t i = 0; i < trend->count; i++)
        put_bar(out, trend, i, bar);
    fputs("</svg>\n<div class=\"ends\"><span>", out);
    firn_page_day(out, trend->scrubs[0]->at);
    fputs("</span><span>", out);
    firn_page_day(out, trend->scrubs[trend->count - 1]->at);
    fputs("</span></div>\n", out);
}

void firn_page_trend(FILE *out, const struct firn_history *history)
{
    struct trend trend = gather(history);

    fputs("<figure class=\"trend\">\n", out);
    if (trend.count > 1 && trend.damaged > 0)
        put_chart(out, &trend);
    fputs("<figcaption>", out);
    if (trend.count == 0) {
        fputs("Not gone through to its end yet.", out);
    } else if (trend.count == 1) {
        fputs("First scrub, so there is no trend yet.", out);
    } else if (trend.damaged == 0) {
        firn_page_counted(out, trend.count, "scrub", "scrubs");
        fputs(" since ", out);
        firn_page_day(out, trend.scrubs[0]->at);
        fputs(", none of them found damage.", out);
    } else {
        fputs("Damaged places in each scrub, ", out);
        firn_page_count(out, trend.most);
        fputs(" at most; ", out);
        firn_page_count(out, trend.damaged);
        fputs(" of ", out);
        firn_page_counted(out, trend.count, "scrub", "scrubs");
        fputs(" found some.", out);
    }
    fputs("</figcaption>\n</figure>\n", out);
}
