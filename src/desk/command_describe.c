/* desk/command_describe.c - the "describe" command: layout, protection, codes, totals */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "desk/commands.h"

#include "desk/opening.h"
#include "desk/trouble.h"
#include "firn/segment.h"

#include <inttypes.h>
#include <math.h>
#include <stdlib.h>
#include <string.h>

enum option { TABLES, PAGE, SPEC, READER };

static const struct firn_args_option options[] = {
    [TABLES] = { "tables", '\0', NULL, "show the codes in use: symbols, lengths, cost beside entropy" },
    [PAGE] = { "page", '\0', NULL, "print the title page" },
    [SPEC] = { "spec", '\0', NULL, "print the format specification that the container carries" },
    [READER] = { "reader", '\0', NULL, "print the C source of a reader that the container carries" },
};

struct tables {
    struct firn_view *view;
    void *work;
    const struct firn_reader_segment *segment;
    uint64_t segments, lost;
    double all_entropy_bits, all_code_bits;
};

static const char *method_name(enum firn_segment_method method)
{
    switch (method) {
    case FIRN_SEGMENT_STORED: return "stored";
    case FIRN_SEGMENT_RUN:    return "run";
    case FIRN_SEGMENT_PREFIX: return "prefix";
    case FIRN_SEGMENT_MATCHED: return "matched";
    case FIRN_SEGMENT_SAMPLES: return "samples";
    }
    return "unknown";
}

static double entropy_bits(const uint32_t counts[256], size_t total)
{
    double bits = 0;

    for (size_t i = 0; i < 256; i++)
        if (counts[i] > 0)
            bits += counts[i] * log2((double)total / counts[i]);
    return bits;
}

/* The symbols of one code length: bytes that can be printed as they are, other bytes in hexadecimal, numbers else. */
static void put_symbols(const uint8_t *lengths, size_t symbols, bool bytes, unsigned length)
{
    if (memchr(lengths, (int)length, symbols) == NULL)
        return;
    printf("    %2u bit%s ", length, length == 1 ? ": " : "s:");
    for (size_t symbol = 0; symbol < symbols; symbol++)
        if (lengths[symbol] == length) {
            if (!bytes)
                printf(" %zu", symbol);
            else
                printf(symbol > 0x20 && symbol < 0x7F ? " %c" : " %02X", (unsigned)symbol);
        }
    putchar('\n');
}

static void put_code(const uint8_t *lengths, size_t symbols, bool bytes)
{
    for (unsigned length = 1; length <= 15; length++)
        put_symbols(lengths, symbols, bytes, length);
}

static bool is_of_bytes(const struct firn_segment_code *code)
{
    return strcmp(code->of, "literals") == 0;
}

static void stretch_words(const struct tables *t, const struct firn_segment_stretch *stretch, double entropy)
{
    double raw = (double)stretch->raw_bytes;

    printf("  %12" PRIu64 " +%-8zu %-7s %8zu bytes", t->segment->content_at + stretch->raw_at, stretch->raw_bytes,
           method_name(stretch->method), stretch->coded_bytes);
    if (stretch->lengths == NULL && stretch->code_count == 0) {
        putchar('\n');
        return;
    }
    printf("  entropy %.4f  code %.4f  tables %.4f bits a byte\n", entropy / raw, (double)stretch->code_bits / raw,
           (double)stretch->table_bits / raw);
    if (stretch->lengths != NULL)
        put_code(stretch->lengths, 256, true);
    for (size_t i = 0; i < stretch->code_count; i++) {
        printf("   code %zu, of %s\n", i + 1, stretch->codes[i].of);
        put_code(stretch->codes[i].lengths, stretch->codes[i].symbols, is_of_bytes(&stretch->codes[i]));
    }
}

static void lengths_json(struct firn_view *view, const uint8_t *lengths, size_t symbols)
{
    bool first = true;

    fputs("\"lengths\":{", view->out);
    for (size_t symbol = 0; symbol < symbols; symbol++)
        if (lengths[symbol] > 0) {
            fprintf(view->out, "%s\"%zu\":%u", first ? "" : ",", symbol, (unsigned)lengths[symbol]);
            first = false;
        }
    fputc('}', view->out);
}

static void stretch_json(const struct tables *t, const struct firn_segment_stretch *stretch, double entropy)
{
    struct firn_view *view = t->view;

    firn_view_begin(view, "stretch", NULL);
    firn_view_count(view, "content-at", NULL, t->segment->content_at + stretch->raw_at);
    firn_view_count(view, "raw-bytes", NULL, stretch->raw_bytes);
    firn_view_words(view, "method", NULL, method_name(stretch->method));
    firn_view_count(view, "coded-bytes", NULL, stretch->coded_bytes);
    firn_view_number(view, "entropy-bits", entropy);
    if (stretch->lengths != NULL || stretch->code_count > 0) {
        firn_view_count(view, "code-bits", NULL, stretch->code_bits);
        firn_view_count(view, "table-bits", NULL, stretch->table_bits);
    }
    if (stretch->lengths != NULL) {
        fputc(',', view->out);
        lengths_json(view, stretch->lengths, 256);
    }
    if (stretch->code_count > 0) {
        fputs(",\"codes\":[", view->out);
        for (size_t i = 0; i < stretch->code_count; i++) {
            fprintf(view->out, "%s{\"of\":\"%s\",", i > 0 ? "," : "", stretch->codes[i].of);
            lengths_json(view, stretch->codes[i].lengths, stretch->codes[i].symbols);
            fputc('}', view->out);
        }
        fputc(']', view->out);
    }
    firn_view_end(view);
}

static void tell_stretch(void *self, const struct firn_segment_stretch *stretch)
{
    struct tables *t = self;
    double entropy = entropy_bits(stretch->counts, stretch->raw_bytes);

    t->all_entropy_bits += entropy;
    t->all_code_bits += 8.0 * (double)stretch->coded_bytes;
    if (t->view->json)
        stretch_json(t, stretch, entropy);
    else
        stretch_words(t, stretch, entropy);
}

static enum firn_status tell_segment(void *self, const struct firn_reader_segment *segment)
{
    struct tables *t = self;

    t->segment = segment;
    t->segments++;
    if (segment->raw == NULL) {
        t->lost++;
        return FIRN_OK;
    }
    return firn_segment_examine(segment->coded, segment->coded_bytes, segment->raw, segment->raw_bytes, t->work,
                                tell_stretch, t);
}

static int show_tables(struct firn_view *view, struct firn_opening *opening, const char *container)
{
    struct tables t = { .view = view };
    struct firn_fault fault = { 0 };
    enum firn_status status = FIRN_NO_MEMORY;

    if (posix_memalign(&t.work, 64, firn_segment_decode_work_bytes()) != 0)
        return firn_trouble_tell(view, container, status, NULL);
    if (!view->json)
        puts("\ncodes, by place in the content: a stretch, its method, its size coded");
    status = firn_reader_segments(opening->reader, tell_segment, &t, &fault);
    free(t.work);
    if (status != FIRN_OK)
        return firn_trouble_tell(view, container, status, &fault);
    if (!view->json && t.segments > t.lost)
        printf("  all %" PRIu64 " segments: entropy within stretches %.0f bytes, coded %.0f bytes\n", t.segments,
               t.all_entropy_bits / 8, t.all_code_bits / 8);
    return t.lost > 0 ? FIRN_EXIT_LOST : FIRN_EXIT_SOUND;
}

static void show(struct firn_view *view, const char *container, const struct firn_reader_layout *layout)
{
    firn_view_begin(view, "describe", container);
    firn_view_words(view, "container", NULL, container);
    firn_view_count(view, "format", "format", 1);
    firn_opening_show_layout(view, layout);
    if (layout->colophon_found) {
        firn_view_count(view, "items", "items", layout->items);
        firn_view_count(view, "withdrawn", layout->withdrawn > 0 ? "withdrawn" : NULL, layout->withdrawn);
        firn_view_bytes(view, "content-bytes", "content", layout->content_bytes);
        firn_view_bytes(view, "stored-bytes", layout->stored_bytes != layout->content_bytes ? "without holes" : NULL,
                        layout->stored_bytes);
        firn_view_bytes(view, "coded-bytes", "coded", layout->coded_bytes);
        firn_view_count(view, "segments", "segments", layout->segments);
        firn_view_hex(view, "catalogue-sha256", "catalogue", layout->catalogue_sha256, sizeof layout->catalogue_sha256);
    }
    firn_view_end(view);
}

/* The layout in the words of the title page, for people. */
static void show_words(const struct firn_reader_layout *layout)
{
    char words[FIRN_READER_LAYOUT_ROOM];

    firn_reader_layout_words(layout, words, sizeof words);
    printf("\n%s", words);
}

static enum firn_status print_text(void *self, const uint8_t *bytes, size_t count)
{
    (void)self;
    if (bytes == NULL)
        printf("\n[here %zu bytes are lost]\n", count);
    else
        fwrite(bytes, 1, count, stdout);      /* whether standard output took it all is asked at the end */
    return FIRN_OK;
}

static int show_text(struct firn_view *view, struct firn_opening *opening, const char *container,
                     enum firn_reader_text which)
{
    enum firn_status status = firn_reader_text(opening->reader, which, print_text, NULL);

    if (status == FIRN_OK)
        return FIRN_EXIT_SOUND;
    if (status == FIRN_END) {
        firn_view_finding(view, "no-text", container, "carries neither specification nor reader: it was packed with "
                                                      "--no-reader");
        return FIRN_EXIT_BAD_DATA;
    }
    if (status != FIRN_LOST)
        return firn_trouble_tell(view, container, status, NULL);
    firn_view_finding(view, "text-lost", container, "some or all of the text is lost; take it from another container");
    return FIRN_EXIT_LOST;
}

static int run(const struct firn_args *args, struct firn_view *view)
{
    struct firn_opening opening;
    const char *container;
    int exit, more = FIRN_EXIT_SOUND;

    if (args->operand_count != 1)
        return firn_trouble_usage(view, "FILE", "name one container");
    if (args->given[PAGE] + args->given[SPEC] + args->given[READER] > 1)
        return firn_trouble_usage(view, "--page, --spec, --reader", "print one text each: choose one");
    container = args->operands[0];
    exit = firn_opening_make(&opening, container, args, view);
    if (exit != FIRN_EXIT_SOUND)
        return exit;
    exit = firn_opening_look(view, container, &opening);
    if (args->given[PAGE]) {
        uint8_t page[4096];

        if (firn_reader_title_page(opening.reader, page) != FIRN_OK)
            firn_view_finding(view, "title-page", container, "its protected copy is lost; this is page 0 as it stands");
        fwrite(page, 1, sizeof page, stdout);
    } else if (args->given[SPEC] || args->given[READER]) {
        more = show_text(view, &opening, container, args->given[SPEC] ? FIRN_READER_TEXT_SPECIFICATION
                                                                      : FIRN_READER_TEXT_SOURCE);
    } else {
        show(view, container, firn_reader_layout_of(opening.reader));
        if (!view->json && !args->quiet)
            show_words(firn_reader_layout_of(opening.reader));
    }
    if (args->given[TABLES])
        more = show_tables(view, &opening, container);
    return firn_opening_leave(&opening, more > exit ? more : exit);
}

const struct firn_command firn_command_describe = {
    .name = "describe",
    .summary = "tell how a container is laid out and protected, and what is in it",
    .usage = "FILE [--tables] [--page | --spec | --reader]",
    .about = "Layout, protection, identity and totals. With --tables also every code: for each\n"
             "stretch of content the symbols by code length, and what the code costs beside\n"
             "the entropy of its bytes each for itself, in bits for each byte of content;\n"
             "matches and contexts go below that.\n\n"
             "A container carries the specification of its format and the source of a reader\n"
             "for those who have no firn; --spec and --reader print them.\n",
    .example = "  firn describe quay-1931.firn\n",
    .options = options, .option_count = sizeof options / sizeof options[0], .run = run
};
