/* The printed sheet. The goal of this code: one or two pages that can be read at arm's length, the banner on
 * each. */
#include "core/figure/sheet.h"

#include "core/document/document.h"
#include "core/figure/canvas.h"
#include <cairo-pdf.h>
#include <pango/pangocairo.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

enum { MARGIN_PT = 44, COLUMNS_MAX = 6 };

struct paper {
    cairo_t *cairo;
    const struct sheet_page *page;
    double y;
    int number;
};

/* Draws wrapped text at (x, y) in a width; returns its height. draw false: only measures. */
static double text(const struct paper *paper, const char *words, double x, double y, double width,
                   double size_pt, bool bold, bool draw)
{
    int height = 0;
    PangoLayout *layout = pango_cairo_create_layout(paper->cairo);
    PangoFontDescription *font = pango_font_description_from_string("DejaVu Sans, sans-serif");
    pango_font_description_set_absolute_size(font, size_pt * PANGO_SCALE);
    pango_font_description_set_weight(font, bold ? PANGO_WEIGHT_BOLD : PANGO_WEIGHT_NORMAL);
    pango_layout_set_font_description(layout, font);
    pango_layout_set_width(layout, (int)(width * PANGO_SCALE));
    pango_layout_set_wrap(layout, PANGO_WRAP_WORD_CHAR);
    pango_layout_set_text(layout, words, -1);
    pango_layout_get_pixel_size(layout, NULL, &height);
    if (draw) {
        cairo_move_to(paper->cairo, x, y);
        pango_cairo_show_layout(paper->cairo, layout);
    }
    g_object_unref(layout);
    pango_font_description_free(font);
    return height;
}

static void begin_page(struct paper *paper)
{
    char foot[64];
    const double width = paper->page->width_pt - 2 * MARGIN_PT;
    paper->number++;
    cairo_set_source_rgb(paper->cairo, 0.1, 0.1, 0.12);
    cairo_rectangle(paper->cairo, MARGIN_PT, 22, width, 20);
    cairo_fill(paper->cairo);
    cairo_set_source_rgb(paper->cairo, 1, 1, 1);
    (void)text(paper, paper->page->banner, MARGIN_PT + 6, 26, width - 12, 9.5, true, true);
    cairo_set_source_rgb(paper->cairo, 0.1, 0.1, 0.12);
    (void)snprintf(foot, sizeof foot, "page %d", paper->number);
    (void)text(paper, foot, MARGIN_PT, paper->page->height_pt - 30, width, 8, false, true);
    paper->y = 54;
}

static void need(struct paper *paper, double height)
{
    if (paper->y + height <= paper->page->height_pt - 40) return;
    cairo_show_page(paper->cairo);
    begin_page(paper);
}

/* Columns between tabs: the first is wide. */
static void draw_row(struct paper *paper, const char *row, bool head)
{
    char copy[SHEET_TEXT_SIZE], *column[COLUMNS_MAX] = {0};
    size_t columns = 0;
    double height = 0;
    const double width = paper->page->width_pt - 2 * MARGIN_PT;
    (void)snprintf(copy, sizeof copy, "%s", row);
    for (char *c = copy; c && columns < COLUMNS_MAX;) {
        char *tab = strchr(c, '\t');
        if (tab) *tab = '\0';
        column[columns++] = c;
        c = tab ? tab + 1 : NULL;
    }
    const double first = columns > 2 ? 0.42 * width : 0.5 * width,
                 rest = columns > 1 ? (width - first) / (double)(columns - 1) : 0;
    for (int pass = 0; pass < 2; pass++) {
        if (pass == 1) need(paper, height);
        for (size_t i = 0; i < columns; i++) {
            const double x = MARGIN_PT + (i == 0 ? 0 : first + (double)(i - 1) * rest);
            const double high =
                text(paper, column[i], x, paper->y, (i == 0 ? first : rest) - 6, 8.6, head, pass == 1);
            if (high > height) height = high;
        }
    }
    paper->y += height + 1;
    cairo_set_source_rgb(paper->cairo, 0.82, 0.82, 0.85);
    cairo_set_line_width(paper->cairo, 0.5);
    cairo_move_to(paper->cairo, MARGIN_PT, paper->y);
    cairo_line_to(paper->cairo, MARGIN_PT + width, paper->y);
    cairo_stroke(paper->cairo);
    cairo_set_source_rgb(paper->cairo, 0.1, 0.1, 0.12);
    paper->y += 1;
}

static void draw_line(struct paper *paper, const struct sheet_line *line, const struct sheet_line *before)
{
    static const double sizes[] = {[SHEET_VERDICT] = 16,
                                   [SHEET_HEADING] = 11,
                                   [SHEET_TEXT] = 9.2,
                                   [SHEET_ROW] = 8.6,
                                   [SHEET_SMALL] = 7.8};
    const double width = paper->page->width_pt - 2 * MARGIN_PT;
    const bool bold = line->style == SHEET_VERDICT || line->style == SHEET_HEADING;
    const bool signature = strncmp(line->text, "name and role", 13) == 0;
    if (line->style == SHEET_ROW) {
        if (signature) {
            need(paper, 60);
            paper->y += 32;
        }
        draw_row(paper, line->text, !before || before->style != SHEET_ROW);
        return;
    }
    if (line->style == SHEET_HEADING) paper->y += 7;
    const double indent = line->style == SHEET_SMALL ? 10 : 0;
    const double height = text(paper, line->text, 0, 0, width - indent, sizes[line->style], bold, false);
    need(paper, height + (bold ? 30 : 0));
    (void)text(paper, line->text, MARGIN_PT + indent, paper->y, width - indent, sizes[line->style], bold,
               true);
    paper->y += height + 2.5;
}

static void draw_figure(struct paper *paper)
{
    const double width = paper->page->width_pt - 2 * MARGIN_PT, scale = 0.62;
    need(paper, paper->page->figure_height_pt + 8);
    cairo_save(paper->cairo);
    cairo_translate(paper->cairo, MARGIN_PT, paper->y);
    cairo_rectangle(paper->cairo, 0, 0, width, paper->page->figure_height_pt);
    cairo_clip(paper->cairo);
    cairo_scale(paper->cairo, scale, scale);
    paper->page->figure(paper->cairo, width / scale, paper->page->figure_height_pt / scale,
                        paper->page->context);
    cairo_restore(paper->cairo);
    cairo_set_source_rgb(paper->cairo, 0.1, 0.1, 0.12);
    paper->y += paper->page->figure_height_pt + 6;
}

enum status sheet_write(const char *path, const struct sheet *sheet, const struct sheet_page *page,
                        bool replace, struct message *why)
{
    struct text_out out = {0};
    cairo_surface_t *surface =
        cairo_pdf_surface_create_for_stream(canvas_stream, &out, page->width_pt, page->height_pt);
    struct paper paper = {.cairo = cairo_create(surface), .page = page};
    cairo_pdf_surface_set_metadata(surface, CAIRO_PDF_METADATA_TITLE,
                                   sheet->lines ? sheet->line[0].text : "sheet");
    begin_page(&paper);
    for (size_t i = 0; i < sheet->lines; i++) {
        draw_line(&paper, &sheet->line[i], i ? &sheet->line[i - 1] : NULL);
        if (i == 2 && page->figure) draw_figure(&paper);
    }
    cairo_show_page(paper.cairo);
    cairo_status_t drawn = cairo_status(paper.cairo);
    cairo_destroy(paper.cairo);
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
