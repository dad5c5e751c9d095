/* The painter. The goal of this code: text that does not fit is cut inside its box and never runs over a
 * neighbour. */
#include "gui/screen/paint.h"

#include <math.h>
#include <pango/pangocairo.h>

struct tint {
    double red, green, blue;
};
static const struct tint light_tints[UI_INKS] = {
    [UI_PAPER] = {1, 1, 1},         [UI_PANEL] = {0.955, 0.96, 0.965}, [UI_FIELD] = {1, 1, 1},
    [UI_TEXT] = {0.10, 0.11, 0.13}, [UI_QUIET] = {0.38, 0.40, 0.44},   [UI_ACCENT] = {0, 0.38, 0.62},
    [UI_WARNING] = {0.70, 0.24, 0}, [UI_BANNER] = {0.12, 0.13, 0.16},  [UI_BANNER_TEXT] = {0.97, 0.97, 0.97}};
static const struct tint dark_tints[UI_INKS] = {
    [UI_PAPER] = {0.09, 0.10, 0.12},      [UI_PANEL] = {0.13, 0.14, 0.17},
    [UI_FIELD] = {0.18, 0.19, 0.22},      [UI_TEXT] = {0.93, 0.94, 0.95},
    [UI_QUIET] = {0.64, 0.67, 0.71},      [UI_ACCENT] = {0.40, 0.74, 0.95},
    [UI_WARNING] = {0.75, 0.30, 0.05},    [UI_BANNER] = {0.03, 0.03, 0.04},
    [UI_BANNER_TEXT] = {0.97, 0.97, 0.97}};

static void set_ink(cairo_t *cairo, enum ui_ink ink, bool dark)
{
    const struct tint tint = dark ? dark_tints[ink] : light_tints[ink];
    cairo_set_source_rgb(cairo, tint.red, tint.green, tint.blue);
}

static void words(cairo_t *cairo, const struct ui_command *command, double scale)
{
    const double pad = 5 * scale;
    int height = 0;
    PangoLayout *layout = pango_cairo_create_layout(cairo);
    PangoFontDescription *font = pango_font_description_from_string("DejaVu Sans, sans-serif");
    pango_font_description_set_absolute_size(font, 14 * scale * PANGO_SCALE);
    pango_font_description_set_weight(font, command->bold ? PANGO_WEIGHT_BOLD : PANGO_WEIGHT_NORMAL);
    pango_layout_set_font_description(layout, font);
    pango_layout_set_width(layout, (int)(fmax(command->box.width - 2 * pad, 1) * PANGO_SCALE));
    pango_layout_set_ellipsize(layout, PANGO_ELLIPSIZE_END);
    pango_layout_set_single_paragraph_mode(layout, TRUE);
    pango_layout_set_alignment(layout, command->place == UI_CENTRE  ? PANGO_ALIGN_CENTER
                                       : command->place == UI_RIGHT ? PANGO_ALIGN_RIGHT
                                                                    : PANGO_ALIGN_LEFT);
    pango_layout_set_text(layout, command->text, -1);
    pango_layout_get_pixel_size(layout, NULL, &height);
    cairo_move_to(cairo, command->box.x + pad, command->box.y + (command->box.height - height) / 2);
    pango_cairo_show_layout(cairo, layout);
    pango_font_description_free(font);
    g_object_unref(layout);
}

void paint_commands(cairo_t *cairo, const struct ui *ui, bool dark, paint_figure figure, const void *view)
{
    for (size_t i = 0; i < ui->commands; i++) {
        const struct ui_command *command = &ui->command[i];
        const struct ui_box box = command->box;
        cairo_save(cairo);
        set_ink(cairo, command->ink, dark);
        switch (command->kind) {
        case UI_FILL:
            cairo_rectangle(cairo, box.x, box.y, box.width, box.height);
            cairo_fill(cairo);
            break;
        case UI_FRAME: /* the focused one is thicker too, not only of another colour */
            cairo_set_line_width(cairo, command->ink == UI_ACCENT ? 2.5 * ui->scale : 1);
            cairo_rectangle(cairo, round(box.x) + 0.5, round(box.y) + 0.5, round(box.width) - 1,
                            round(box.height) - 1);
            cairo_stroke(cairo);
            break;
        case UI_WORDS: words(cairo, command, ui->scale); break;
        case UI_FIGURE:
            cairo_rectangle(cairo, box.x, box.y, box.width, box.height);
            cairo_clip(cairo);
            cairo_translate(cairo, box.x, box.y);
            figure(view, command->figure, cairo, box.width, box.height, ui->scale);
            break;
        }
        cairo_restore(cairo);
    }
}
