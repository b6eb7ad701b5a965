/* desk/page_core.c - a container drawn as a core */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "desk/page_core.h"

#include "desk/page.h"

#include <math.h>

enum { WIDTH = 1200, HEIGHT = 60, PEAK_HEIGHT = 36 };

void firn_page_core_patterns(FILE *out)
{
    fputs("<svg width=\"0\" height=\"0\" style=\"position:absolute\" aria-hidden=\"true\"><defs>\n"
          "<pattern id=\"mended\" width=\"6\" height=\"6\" patternUnits=\"userSpaceOnUse\">"
          "<rect width=\"6\" height=\"6\" fill=\"#d9ebf4\"/>"
          "<circle cx=\"3\" cy=\"3\" r=\"1.6\" fill=\"#1d5b7a\"/></pattern>\n"
          "<pattern id=\"rebuilt\" width=\"6\" height=\"6\" patternUnits=\"userSpaceOnUse\">"
          "<rect width=\"6\" height=\"6\" fill=\"#fff\"/>"
          "<path d=\"M-1 7L7 -1M-1 1L1 -1M5 7L7 5\" stroke=\"#16242e\" stroke-width=\"1.6\"/></pattern>\n"
          "<pattern id=\"unseen\" width=\"10\" height=\"10\" patternUnits=\"userSpaceOnUse\">"
          "<rect width=\"10\" height=\"10\" fill=\"#fff\"/>"
          "<path d=\"M0 5H5\" stroke=\"#8a979f\" stroke-width=\"1.2\"/></pattern>\n"
          "</defs></svg>\n", out);
}

static void put_legend(FILE *out, const char *fill, const char *words)
{
    fprintf(out, "<li><svg viewBox=\"0 0 32 19\" aria-hidden=\"true\"><rect width=\"32\" height=\"19\" fill=\"%s\"/>"
                 "</svg>%s</li>\n", fill, words);
}

void firn_page_core_legend(FILE *out)
{
    fputs("<ul class=\"legend\">\n", out);
    put_legend(out, "#d9ebf4", "clean");
    put_legend(out, "url(#mended)", "mended from its own check words");
    put_legend(out, "url(#rebuilt)", "rebuilt from the reserve");
    put_legend(out, "#101418", "lost");
    put_legend(out, "url(#unseen)", "not looked at yet");
    fputs("</ul>\n", out);
}

static void put_band(FILE *out, double x, double width, double y, double height, const char *fill)
{
    fprintf(out, "<rect x=\"%.2f\" y=\"%.2f\" width=\"%.2f\" height=\"%.2f\" fill=\"%s\"/>\n", x, y, width, height,
            fill);
}

struct span { double x, width; uint64_t blocks; };

/* Where a slice lies; its blocks are 0 where the container has fewer blocks than there are slices. */
static struct span span_of(const struct firn_core *core, size_t slice)
{
    uint64_t first = firn_core_first_block(slice, core->blocks), next = firn_core_first_block(slice + 1, core->blocks);
    double scale = (double)WIDTH / (double)core->blocks;

    return (struct span){ (double)first * scale, (double)(next - first) * scale, next - first };
}

static uint64_t damage(const struct firn_core_slice *slice)
{
    return slice->mended + slice->rebuilt + slice->lost;
}

static void put_peaks(FILE *out, const struct firn_core *core)
{
    bool any = false;

    for (size_t i = 0; i < FIRN_CORE_SLICES; i++)
        any = any || damage(&core->slices[i]) > 0;
    if (!any)
        return;
    fprintf(out, "<svg class=\"peaks\" viewBox=\"0 0 %d %d\" preserveAspectRatio=\"none\" aria-hidden=\"true\">\n",
            WIDTH, PEAK_HEIGHT);
    for (size_t i = 0; i < FIRN_CORE_SLICES; i++) {
        struct span span = span_of(core, i);
        uint64_t blocks = damage(&core->slices[i]);
        double height;

        if (blocks == 0)
            continue;
        height = PEAK_HEIGHT * (0.2 + 0.8 * log2(1 + (double)blocks) / log2(1 + (double)span.blocks));
        height = height < PEAK_HEIGHT ? height : PEAK_HEIGHT;
        put_band(out, span.x + span.width * 0.15, span.width * 0.7, PEAK_HEIGHT - height, height,
                 core->slices[i].lost > 0 ? "#101418" : "#1d5b7a");
    }
    fputs("</svg>\n", out);
}

/* The kinds that a slice has share its height. */
static void put_slice(FILE *out, const struct firn_core_slice *slice, const struct span *span)
{
    const struct { uint64_t blocks; const char *fill; } kinds[] = {
        { slice->mended, "url(#mended)" }, { slice->rebuilt, "url(#rebuilt)" }, { slice->lost, "#101418" }
    };
    int present = (slice->mended > 0) + (slice->rebuilt > 0) + (slice->lost > 0);
    double y = 0, height = present == 0 ? 0 : (double)HEIGHT / present;

    for (size_t i = 0; i < sizeof kinds / sizeof kinds[0]; i++)
        if (kinds[i].blocks > 0) {
            put_band(out, span->x, span->width, y, height, kinds[i].fill);
            y += height;
        }
}

static void put_core(FILE *out, const struct firn_core *core, const struct firn_history_entry *newest)
{
    double seen = WIDTH * ((double)newest->reached / (double)newest->blocks);

    fprintf(out, "<div class=\"core\"><svg viewBox=\"0 0 %d %d\" preserveAspectRatio=\"none\" role=\"img\" "
                 "shape-rendering=\"crispEdges\"><title>", WIDTH, HEIGHT);
    firn_page_counted(out, newest->blocks, "block", "blocks");
    fputs(", first to last: ", out);
    firn_page_counted(out, newest->mended, "mended, ", "mended, ");
    firn_page_counted(out, newest->rebuilt, "rebuilt, ", "rebuilt, ");
    firn_page_counted(out, newest->lost, "lost", "lost");
    fputs("</title>\n", out);
    put_band(out, 0, seen, 0, HEIGHT, "#d9ebf4");
    if (seen < WIDTH)
        put_band(out, seen, WIDTH - seen, 0, HEIGHT, "url(#unseen)");
    for (size_t i = 0; i < FIRN_CORE_SLICES; i++) {
        struct span span = span_of(core, i);

        if (span.blocks > 0)
            put_slice(out, &core->slices[i], &span);
    }
    fputs("</svg></div>\n", out);
}

void firn_page_core(FILE *out, const struct firn_history *history)
{
    const struct firn_history_entry *newest = &history->entries[history->count - 1];

    fputs("<figure>\n", out);
    put_peaks(out, &history->core);
    put_core(out, &history->core, newest);
    fputs("<div class=\"ends\"><span>block 0</span><span>", out);
    if (newest->reached < newest->blocks) {
        fputs("looked at up to block ", out);
        firn_page_count(out, newest->reached);
        fputs(" so far</span><span>", out);
    }
    fputs("block ", out);
    firn_page_count(out, newest->blocks - 1);
    fputs("</span></div>\n</figure>\n", out);
}
