/* desk/drawing.c - a page of lines, boxes and words as SVG */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "desk/drawing.h"

#include "desk/trouble.h"
#include "firn/store.h"

#include <errno.h>
#include <stdlib.h>
#include <string.h>

/* & < > " as XML 1.0 asks for */
static void put_escaped(FILE *out, const char *words)
{
    for (; *words != '\0'; words++)
        switch (*words) {
        case '&': fputs("&amp;", out); break;
        case '<': fputs("&lt;", out); break;
        case '>': fputs("&gt;", out); break;
        case '"': fputs("&quot;", out); break;
        default:  fputc(*words, out);
        }
}

enum firn_status firn_drawing_start(struct firn_drawing *drawing, double width, double height, const char *title)
{
    *drawing = (struct firn_drawing){ .count = 0 };
    drawing->out = open_memstream(&drawing->bytes, &drawing->count);
    if (drawing->out == NULL)
        return FIRN_NO_MEMORY;
    fprintf(drawing->out,
            "<?xml version=\"1.0\" encoding=\"UTF-8\"?>\n"
            "<svg xmlns=\"http://www.w3.org/2000/svg\" width=\"%gmm\" height=\"%gmm\" viewBox=\"0 0 %g %g\">\n<title>",
            width, height, width, height);
    put_escaped(drawing->out, title);
    fprintf(drawing->out, "</title>\n<rect width=\"%g\" height=\"%g\" fill=\"white\"/>\n", width, height);
    return FIRN_OK;
}

static void put_pen(FILE *out, const struct firn_drawing_pen *pen)
{
    if (pen == NULL || pen->width <= 0)
        return;
    fprintf(out, " stroke=\"%s\" stroke-width=\"%g\"", pen->ink != NULL ? pen->ink : "black", pen->width);
    if (pen->dashes != NULL)
        fprintf(out, " stroke-dasharray=\"%s\"", pen->dashes);
}

void firn_drawing_line(struct firn_drawing *drawing, double x1, double y1, double x2, double y2,
                       const struct firn_drawing_pen *pen)
{
    fprintf(drawing->out, "<line x1=\"%.3f\" y1=\"%.3f\" x2=\"%.3f\" y2=\"%.3f\"", x1, y1, x2, y2);
    put_pen(drawing->out, pen);
    fputs("/>\n", drawing->out);
}

void firn_drawing_curve(struct firn_drawing *drawing, const double *x, const double *y, size_t points,
                        const struct firn_drawing_pen *pen)
{
    fputs("<polyline fill=\"none\" stroke-linejoin=\"round\" points=\"", drawing->out);
    for (size_t i = 0; i < points; i++)
        fprintf(drawing->out, "%s%.3f,%.3f", i > 0 ? " " : "", x[i], y[i]);
    fputc('"', drawing->out);
    put_pen(drawing->out, pen);
    fputs("/>\n", drawing->out);
}

void firn_drawing_box(struct firn_drawing *drawing, double x, double y, double width, double height, const char *fill,
                      const struct firn_drawing_pen *pen)
{
    fprintf(drawing->out, "<rect x=\"%.4f\" y=\"%.4f\" width=\"%.4f\" height=\"%.4f\" fill=\"%s\"", x, y, width, height,
            fill != NULL ? fill : "none");
    put_pen(drawing->out, pen);
    fputs("/>\n", drawing->out);
}

void firn_drawing_ring(struct firn_drawing *drawing, double x, double y, double radius,
                       const struct firn_drawing_pen *pen)
{
    fprintf(drawing->out, "<circle cx=\"%.3f\" cy=\"%.3f\" r=\"%.3f\" fill=\"none\"", x, y, radius);
    put_pen(drawing->out, pen);
    fputs("/>\n", drawing->out);
}

static bool is_mono(const struct firn_drawing_type *type)
{
    return type->face == FIRN_DRAWING_MONO || type->face == FIRN_DRAWING_MONO_BOLD;
}

/*
 * 0.61 of the size is a monospaced letter of the usual families; 0.6 and 0.66 are above the average of running text in
 * plain and bold ones; East Asian letters are square.
 */
double firn_drawing_width(const struct firn_drawing_type *type, const char *words)
{
    double letter = is_mono(type) ? 0.61 : type->face == FIRN_DRAWING_BOLD ? 0.66 : 0.6, width = 0;
    size_t left = strlen(words);

    while (left > 0) {
        size_t step = firn_text_utf8(words, left);

        width += step >= 3 && (uint8_t)words[0] >= 0xE2 ? 1.05 : letter;
        step = step == 0 ? 1 : step;
        words += step;
        left -= step;
    }
    return width * type->size;
}

void firn_drawing_words(struct firn_drawing *drawing, double x, double y, const struct firn_drawing_type *type,
                        const char *words)
{
    static const char *const anchors[] = { "start", "middle", "end" };
    bool bold = type->face == FIRN_DRAWING_BOLD || type->face == FIRN_DRAWING_MONO_BOLD;
    double width = firn_drawing_width(type, words), size = type->size;

    if (*words == '\0')
        return;
    if (type->most > 0 && width > type->most)
        size *= type->most / width;
    fprintf(drawing->out, "<text x=\"%.3f\" y=\"%.3f\" font-family=\"%s\" font-size=\"%.4g\"%s text-anchor=\"%s\"", x,
            y, is_mono(type) ? "'DejaVu Sans Mono', 'Liberation Mono', monospace"
                             : "'DejaVu Sans', 'Liberation Sans', sans-serif", size,
            bold ? " font-weight=\"bold\"" : "", anchors[type->anchor]);
    fputs(" xml:space=\"preserve\">", drawing->out);
    put_escaped(drawing->out, words);
    fputs("</text>\n", drawing->out);
}

static enum firn_status write_file(const struct firn_drawing *drawing, const char *path, bool replace,
                                   struct firn_fault *fault)
{
    struct firn_store_stage *stage;
    struct firn_store *store;
    enum firn_status status = firn_store_stage_open(path, replace, firn_memory_system(), &stage, fault);

    if (status != FIRN_OK)
        return status;
    store = firn_store_stage_store(stage);
    status = store->write_at(store->self, 0, drawing->bytes, drawing->count, &fault->os_error);
    if (status == FIRN_OK)
        status = firn_store_stage_keep(stage, fault);
    firn_store_stage_close(stage);
    return status;
}

int firn_drawing_keep(struct firn_drawing *drawing, struct firn_view *view, const char *path, bool replace)
{
    struct firn_fault fault = { 0 };
    enum firn_status status = FIRN_OK;
    bool whole;

    fputs("</svg>\n", drawing->out);
    whole = !ferror(drawing->out);
    if (fclose(drawing->out) != 0 || !whole)
        status = FIRN_NO_MEMORY;
    else if (strcmp(path, "-") != 0)
        status = write_file(drawing, path, replace, &fault);
    else if (fwrite(drawing->bytes, 1, drawing->count, stdout) != drawing->count)
        status = FIRN_IO, fault.os_error = errno;
    free(drawing->bytes);
    *drawing = (struct firn_drawing){ .count = 0 };
    return status == FIRN_OK ? FIRN_EXIT_SOUND : firn_trouble_tell(view, path, status, &fault);
}
