/* Canvas. The goal of this code: one look for screen, PNG and print; text never on text; readable in black
 * and white. */
#include "core/figure/canvas.h"

#include <math.h>
#include <pango/pangocairo.h>
#include <stdio.h>

static const struct colour light_inks[INKS] = {{1, 1, 1},          {0.10, 0.11, 0.13}, {0.34, 0.36, 0.40},
                                               {0.88, 0.89, 0.91}, {0.0, 0.38, 0.62},  {0.72, 0.28, 0.0},
                                               {0.0, 0.44, 0.32},  {0.0, 0.38, 0.62}};
static const struct colour dark_inks[INKS] = {{0.09, 0.10, 0.12}, {0.93, 0.94, 0.95}, {0.66, 0.69, 0.73},
                                              {0.22, 0.24, 0.27}, {0.40, 0.74, 0.95}, {0.98, 0.58, 0.28},
                                              {0.30, 0.80, 0.62}, {0.40, 0.74, 0.95}};

struct colour ink_colour(enum ink ink, bool dark)
{
    return dark ? dark_inks[ink] : light_inks[ink];
}

static double linear(double channel)
{
    return channel <= 0.03928 ? channel / 12.92 : pow((channel + 0.055) / 1.055, 2.4);
}

static double luminance(struct colour colour)
{
    return 0.2126 * linear(colour.red) + 0.7152 * linear(colour.green) + 0.0722 * linear(colour.blue);
}

double colour_contrast(struct colour a, struct colour b)
{
    const double first = luminance(a), second = luminance(b);
    return (fmax(first, second) + 0.05) / (fmin(first, second) + 0.05);
}

struct canvas canvas_begin(cairo_t *cairo, double width, double height, const struct figure_style *style)
{
    struct canvas canvas = {
        .cairo = cairo, .dark = style && style->dark, .scale = style && style->scale > 0 ? style->scale : 1};
    canvas_ink(&canvas, INK_PAPER, 1);
    cairo_rectangle(cairo, 0, 0, width, height);
    cairo_fill(cairo);
    return canvas;
}

void canvas_ink(const struct canvas *canvas, enum ink ink, double alpha)
{
    const struct colour colour = ink_colour(ink, canvas->dark);
    cairo_set_source_rgba(canvas->cairo, colour.red, colour.green, colour.blue, alpha);
}

double canvas_line_height(const struct canvas *canvas)
{
    return 19 * canvas->scale;
}

static PangoLayout *layout_of(const struct canvas *canvas, const char *text, double size, bool bold)
{
    PangoLayout *layout = pango_cairo_create_layout(canvas->cairo);
    PangoFontDescription *font = pango_font_description_from_string("DejaVu Sans, sans-serif");
    pango_font_description_set_absolute_size(font, 14 * canvas->scale * size * PANGO_SCALE);
    pango_font_description_set_weight(font, bold ? PANGO_WEIGHT_BOLD : PANGO_WEIGHT_NORMAL);
    pango_layout_set_font_description(layout, font);
    pango_layout_set_text(layout, text, -1);
    pango_font_description_free(font);
    return layout;
}

struct box canvas_text_size(const struct canvas *canvas, const char *text, double size, bool bold)
{
    int width = 0, height = 0;
    PangoLayout *layout = layout_of(canvas, text, size, bold);
    pango_layout_get_pixel_size(layout, &width, &height);
    g_object_unref(layout);
    return (struct box){0, 0, width, height};
}

struct box canvas_text(struct canvas *canvas, const char *text, double x, double y, enum text_place place,
                       double size, bool bold)
{
    int width = 0, height = 0;
    PangoLayout *layout = layout_of(canvas, text, size, bold);
    pango_layout_get_pixel_size(layout, &width, &height);
    const double left = place == TEXT_LEFT ? x : place == TEXT_CENTRE ? x - width / 2.0 : x - width;
    cairo_move_to(canvas->cairo, left, y);
    pango_cairo_show_layout(canvas->cairo, layout);
    g_object_unref(layout);
    return (struct box){left, y, width, height};
}

bool box_meets(struct box a, struct box b)
{
    return a.x < b.x + b.width && b.x < a.x + a.width && a.y < b.y + b.height && b.y < a.y + a.height;
}

void canvas_foot(struct canvas *canvas, double height, const struct figure_style *style)
{
    if (!style || !style->approval) return;
    canvas_ink(canvas, INK_TEXT, 1);
    (void)canvas_text(canvas, style->approval, 8 * canvas->scale, height - 17 * canvas->scale, TEXT_LEFT, 0.8,
                      true);
}

void canvas_take(struct canvas *canvas, struct box box)
{
    if (canvas->labels < LABELS_MAX) canvas->label[canvas->labels++] = box;
}

static bool is_free(const struct canvas *canvas, struct box box, struct box within)
{
    if (box.x < within.x || box.y < within.y || box.x + box.width > within.x + within.width ||
        box.y + box.height > within.y + within.height)
        return false;
    for (size_t i = 0; i < canvas->labels; i++)
        if (box_meets(canvas->label[i], box)) return false;
    return true;
}

bool canvas_label(struct canvas *canvas, const char *text, double x, double y, struct box within,
                  enum ink ink)
{
    const struct box size = canvas_text_size(canvas, text, 0.93, false);
    const double gap = 5 * canvas->scale;
    const double at[][2] = {{x + gap, y - size.height - 1},
                            {x + gap, y + 1},
                            {x - gap - size.width, y - size.height - 1},
                            {x - gap - size.width, y + 1},
                            {x - size.width / 2, y - size.height - gap},
                            {x + gap, y - 2 * size.height - 2},
                            {x - gap - size.width, y + size.height}};
    for (size_t i = 0; i < sizeof at / sizeof at[0]; i++) {
        const struct box box = {at[i][0], at[i][1], size.width, size.height};
        if (!is_free(canvas, box, within)) continue;
        canvas_ink(canvas, INK_PAPER, 0.8); /* keeps lines from running through the letters */
        cairo_rectangle(canvas->cairo, box.x - 2, box.y, box.width + 4, box.height);
        cairo_fill(canvas->cairo);
        canvas_ink(canvas, ink, 1);
        (void)canvas_text(canvas, text, box.x, box.y, TEXT_LEFT, 0.93, false);
        canvas_take(canvas, box);
        return true;
    }
    return false;
}

/* Heckbert 1990: the step is 1, 2 or 5 times a power of ten. */
static double nice_step(double span, int most)
{
    const double rough = span / fmax(1, most - 1), power = pow(10, floor(log10(rough))), part = rough / power;
    return (part <= 1 ? 1 : part <= 2 ? 2 : part <= 5 ? 5 : 10) * power;
}

struct axis axis_make(double low, double high, int most, bool from_zero, bool widen)
{
    struct axis axis = {.low = from_zero ? fmin(0, low) : low, .high = high};
    if (!(axis.high > axis.low)) axis.high = axis.low + 1;
    if (most > TICKS_MAX - 2) most = TICKS_MAX - 2;
    const double step = nice_step(axis.high - axis.low, most);
    if (widen) {
        axis.low = floor(axis.low / step + 1e-9) * step;
        axis.high = ceil(axis.high / step - 1e-9) * step;
    }
    axis.decimals = (int)fmax(0, -floor(log10(step) + 1e-9));
    for (double tick = ceil(axis.low / step - 1e-9) * step;
         tick <= axis.high + 1e-9 * step && axis.ticks < TICKS_MAX; tick += step)
        axis.tick[axis.ticks++] = fabs(tick) < 1e-9 * step ? 0 : tick;
    if (axis.ticks < 2 && most < TICKS_MAX - 2) /* a coarse step fell beside a short range: a finer one */
        return axis_make(axis.low, axis.high, 2 * most, false, false);
    return axis;
}

double plot_x(const struct plot *plot, double value)
{
    return plot->area.x + plot->area.width * (value - plot->x.low) / (plot->x.high - plot->x.low);
}

double plot_y(const struct plot *plot, double value)
{
    return plot->area.y + plot->area.height * (1 - (value - plot->y.low) / (plot->y.high - plot->y.low));
}

static void line(const struct canvas *canvas, double x1, double y1, double x2, double y2)
{
    cairo_move_to(canvas->cairo, round(x1) + 0.5, round(y1) + 0.5);
    cairo_line_to(canvas->cairo, round(x2) + 0.5, round(y2) + 0.5);
    cairo_stroke(canvas->cairo);
}

void plot_frame(struct canvas *canvas, const struct plot *plot, const char *x_title, const char *y_title)
{
    const struct box area = plot->area;
    char text[48];
    const double half = canvas_text_size(canvas, "0", 0.86, false).height / 2;
    cairo_set_line_width(canvas->cairo, 1);
    for (size_t i = 0; i < plot->y.ticks; i++) {
        const double y = plot_y(plot, plot->y.tick[i]);
        canvas_ink(canvas, INK_GRID, 1);
        line(canvas, area.x, y, area.x + area.width, y);
        canvas_ink(canvas, INK_QUIET, 1);
        (void)snprintf(text, sizeof text, "%.*f", plot->y.decimals, plot->y.tick[i]);
        (void)canvas_text(canvas, text, area.x - 6 * canvas->scale, y - half, TEXT_RIGHT, 0.86, false);
    }
    for (size_t i = 0; i < plot->x.ticks; i++) {
        const double x = plot_x(plot, plot->x.tick[i]);
        canvas_ink(canvas, INK_GRID, 1);
        line(canvas, x, area.y, x, area.y + area.height);
        if (!x_title) continue;
        canvas_ink(canvas, INK_QUIET, 1);
        (void)snprintf(text, sizeof text, "%.*f", plot->x.decimals, plot->x.tick[i]);
        const double wide = canvas_text_size(canvas, text, 0.86, false).width;
        (void)canvas_text(canvas, text, fmin(x - wide / 2, area.x + area.width - wide),
                          area.y + area.height + 3 * canvas->scale, TEXT_LEFT, 0.86, false);
    }
    canvas_ink(canvas, INK_QUIET, 1);
    line(canvas, area.x, area.y + area.height, area.x + area.width, area.y + area.height);
    canvas_ink(canvas, INK_TEXT, 1);
    if (x_title)
        (void)canvas_text(canvas, x_title, area.x + area.width,
                          area.y + area.height + 3 * canvas->scale + canvas_line_height(canvas), TEXT_RIGHT,
                          0.93, false);
    if (y_title)
        (void)canvas_text(canvas, y_title, area.x, area.y - canvas_line_height(canvas) - 2 * canvas->scale,
                          TEXT_LEFT, 0.93, true);
}

static void clip_to(const struct canvas *canvas, struct box area)
{
    cairo_save(canvas->cairo);
    cairo_rectangle(canvas->cairo, area.x - 1, area.y - 2, area.width + 2, area.height + 4);
    cairo_clip(canvas->cairo);
}

void plot_curve(struct canvas *canvas, const struct plot *plot, const double *x, const double *y,
                size_t count, enum ink ink, double line_width, bool dashed)
{
    const double dash[2] = {6 * canvas->scale, 4 * canvas->scale};
    bool pen_down = false;
    clip_to(canvas, plot->area);
    canvas_ink(canvas, ink, 1);
    cairo_set_line_width(canvas->cairo, line_width * canvas->scale);
    cairo_set_line_join(canvas->cairo, CAIRO_LINE_JOIN_ROUND);
    if (dashed) cairo_set_dash(canvas->cairo, dash, 2, 0);
    for (size_t i = 0; i < count; i++) {
        if (!isfinite(y[i])) {
            pen_down = false;
            continue;
        }
        if (pen_down)
            cairo_line_to(canvas->cairo, plot_x(plot, x[i]), plot_y(plot, y[i]));
        else
            cairo_move_to(canvas->cairo, plot_x(plot, x[i]), plot_y(plot, y[i]));
        pen_down = true;
    }
    cairo_stroke(canvas->cairo);
    cairo_restore(canvas->cairo);
}

void plot_band(struct canvas *canvas, const struct plot *plot, const double *x, const double *low,
               const double *high, size_t count, enum ink ink, double alpha)
{
    if (count < 2) return;
    clip_to(canvas, plot->area);
    cairo_move_to(canvas->cairo, plot_x(plot, x[0]), plot_y(plot, high[0]));
    for (size_t i = 1; i < count; i++)
        cairo_line_to(canvas->cairo, plot_x(plot, x[i]), plot_y(plot, high[i]));
    for (size_t i = count; i-- > 0;) cairo_line_to(canvas->cairo, plot_x(plot, x[i]), plot_y(plot, low[i]));
    cairo_close_path(canvas->cairo);
    canvas_ink(canvas, ink, alpha);
    cairo_fill(canvas->cairo);
    cairo_restore(canvas->cairo);
}
