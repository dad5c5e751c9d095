/* The dose ledger as bars to the limit. The goal of this code: how near each limit a plan comes, the nearest
 * first to be seen. */
#include "core/figure/canvas.h"

#include <math.h>
#include <stdio.h>

/* Numbers as a person writes them: no exponent below a million. */
static const char *plain(double value, char buffer[32])
{
    const double size = fabs(value);
    (void)snprintf(buffer, 32, size >= 1000 ? "%.0f" : size >= 100 ? "%.1f" : "%.3g", value);
    return buffer;
}

static void draw_entry(struct canvas *canvas, const struct ledger_figure *figure, double width, double y)
{
    const double edge = 8 * canvas->scale, line_height = canvas_line_height(canvas), bar = width - 2 * edge;
    const bool broken = figure->share > 1;
    char text[128], value[32], limit[32];
    canvas_ink(canvas, INK_TEXT, 1);
    (void)snprintf(text, sizeof text, "%s of %s %s", plain(figure->value, value), plain(figure->limit, limit),
                   dose_figure_unit(figure->figure));
    const struct box right = canvas_text(canvas, text, width - edge, y, TEXT_RIGHT, 0.84, broken);
    cairo_save(canvas->cairo);
    cairo_rectangle(canvas->cairo, 0, y, right.x - edge, line_height);
    cairo_clip(canvas->cairo);
    (void)snprintf(text, sizeof text, "%u: %s", figure->channel, dose_figure_text(figure->figure));
    (void)canvas_text(canvas, text, edge, y, TEXT_LEFT, 0.84, broken);
    cairo_restore(canvas->cairo);
    canvas_ink(canvas, INK_GRID, 1);
    cairo_rectangle(canvas->cairo, edge, y + 0.95 * line_height, bar, 0.22 * line_height);
    cairo_fill(canvas->cairo);
    canvas_ink(canvas, broken ? INK_VERMILION : INK_BLUE, 1);
    cairo_rectangle(canvas->cairo, edge, y + 0.95 * line_height, bar * fmin(1, figure->share),
                    0.22 * line_height);
    cairo_fill(canvas->cairo);
}

void figure_ledger_draw(cairo_t *cairo, double width, double height, const struct ledger *ledger,
                        const struct figure_style *style)
{
    struct canvas canvas = canvas_begin(cairo, width, height, style);
    const double line_height = canvas_line_height(&canvas);
    double y = 6 * canvas.scale;
    canvas_ink(&canvas, ledger->within ? INK_TEXT : INK_VERMILION, 1);
    (void)canvas_text(&canvas, ledger->within ? "Dose: within every limit" : "DOSE: A LIMIT IS BROKEN",
                      8 * canvas.scale, y, TEXT_LEFT, 1, true);
    y += 1.4 * line_height;
    for (size_t i = 0; i < ledger->figures && y + 1.3 * line_height <= height; i++) {
        draw_entry(&canvas, &ledger->figure[i], width, y);
        y += 1.42 * line_height;
    }
}
