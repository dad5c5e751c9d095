/* The painter: a frame's command list onto a cairo surface, the same for a window and for a picture. Knows no
 * SDL. */
#ifndef PULSEWRIGHT_GUI_SCREEN_PAINT_H
#define PULSEWRIGHT_GUI_SCREEN_PAINT_H
#include "gui/widget/ui.h"
#include <cairo.h>

/* Draws figure `figure` of the view into a box at the origin. */
typedef void (*paint_figure)(const void *view, int figure, cairo_t *cairo, double width, double height,
                             double scale);
void paint_commands(cairo_t *cairo, const struct ui *ui, bool dark, paint_figure figure, const void *view);

#endif
