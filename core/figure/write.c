/* Figures into files. The goal of this code: the ending of the name says the form; nothing is overwritten
 * unasked. */
#include "core/document/document.h"
#include "core/figure/canvas.h"

#include <cairo-pdf.h>
#include <cairo-svg.h>
#include <stdlib.h>
#include <string.h>

cairo_status_t canvas_stream(void *context, const unsigned char *data, unsigned length)
{
    struct text_out *out = context;
    if (out->size + length + 1 > out->capacity) {
        const size_t capacity = 2 * (out->size + length + 1);
        char *grown = realloc(out->data, capacity);
        if (!grown) return CAIRO_STATUS_NO_MEMORY;
        out->data = grown;
        out->capacity = capacity;
    }
    memcpy(out->data + out->size, data, length);
    out->size += length;
    return CAIRO_STATUS_SUCCESS;
}

enum status figure_write(const char *path, double width, double height,
                         void (*draw)(cairo_t *, double, double, const void *), const void *context,
                         bool replace, struct message *why)
{
    const char *ending = strrchr(path, '.');
    struct text_out out = {0};
    cairo_surface_t *surface = NULL;
    const bool png = ending && strcmp(ending, ".png") == 0;
    if (png)
        surface = cairo_image_surface_create(CAIRO_FORMAT_ARGB32, (int)width, (int)height);
    else if (ending && strcmp(ending, ".svg") == 0)
        surface = cairo_svg_surface_create_for_stream(canvas_stream, &out, width, height);
    else if (ending && strcmp(ending, ".pdf") == 0)
        surface = cairo_pdf_surface_create_for_stream(canvas_stream, &out, width * 0.75, height * 0.75);
    else
        return status_fail(why, STATUS_USAGE, "%s: a picture ends in .png, .svg or .pdf", path);
    cairo_t *cairo = cairo_create(surface);
    if (!png && strcmp(ending, ".pdf") == 0) cairo_scale(cairo, 0.75, 0.75);
    draw(cairo, width, height, context);
    cairo_status_t drawn = cairo_status(cairo);
    cairo_destroy(cairo);
    if (png && drawn == CAIRO_STATUS_SUCCESS)
        drawn = cairo_surface_write_to_png_stream(surface, canvas_stream, &out);
    cairo_surface_finish(surface);
    if (drawn == CAIRO_STATUS_SUCCESS) drawn = cairo_surface_status(surface);
    cairo_surface_destroy(surface);
    const enum status status =
        drawn == CAIRO_STATUS_SUCCESS
            ? document_write_file(path, out.data, out.size, replace, why)
            : status_fail(why, STATUS_INTERNAL, "%s: %s", path, cairo_status_to_string(drawn));
    text_out_free(&out);
    return status;
}
