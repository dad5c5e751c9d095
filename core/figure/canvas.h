/* Canvas: what all figures share: colours, text, axes with ticks, labels that keep clear of each other.
 * Private to core/figure. */
#ifndef PULSEWRIGHT_CORE_FIGURE_CANVAS_H
#define PULSEWRIGHT_CORE_FIGURE_CANVAS_H
#include "core/figure/figure.h"
#include <stdbool.h>
#include <stddef.h>

/* Roles of colour. Hues: blue, vermilion and bluish green of Okabe and Ito's set (2008, "Color Universal
 * Design"), darkened or lightened until text in them has a contrast of 4.5:1 on the background (W3C
 * WCAG 2.1, 1.4.3). Never colour alone: lines differ in width or dash too. */
enum ink { INK_PAPER, INK_TEXT, INK_QUIET, INK_GRID, INK_BLUE, INK_VERMILION, INK_GREEN, INK_BAND, INKS };
struct colour {
    double red, green, blue;
};
struct colour ink_colour(enum ink ink, bool dark);
/* Relative luminance and contrast by the formulas of WCAG 2.1. */
double colour_contrast(struct colour a, struct colour b);

struct box {
    double x, y, width, height;
};

enum { LABELS_MAX = 64, TICKS_MAX = 16 };
struct canvas {
    cairo_t *cairo;
    bool dark;
    double scale; /* text of 14 px at 1 */
    size_t labels;
    struct box label[LABELS_MAX]; /* where text stands already */
};
enum text_place { TEXT_LEFT, TEXT_CENTRE, TEXT_RIGHT };

struct canvas canvas_begin(cairo_t *cairo, double width, double height, const struct figure_style *style);
void canvas_ink(const struct canvas *canvas, enum ink ink, double alpha);
double canvas_line_height(const struct canvas *canvas);
/* Size of a text at a relative size (1: body). */
struct box canvas_text_size(const struct canvas *canvas, const char *text, double size, bool bold);
/* Draws text with its left, centre or right at x and its top at y; returns its box. Not noted as a label. */
struct box canvas_text(struct canvas *canvas, const char *text, double x, double y, enum text_place place,
                       double size, bool bold);
/* Draws a label at the first of four places around (x, y) that is free and inside `within`; false: none is,
 * nothing is drawn. */
bool canvas_label(struct canvas *canvas, const char *text, double x, double y, struct box within,
                  enum ink ink);
/* The style's approval, small, at the foot's left. */
void canvas_foot(struct canvas *canvas, double height, const struct figure_style *style);
void canvas_take(struct canvas *canvas, struct box box); /* this place is used */
bool box_meets(struct box a, struct box b);

/* For cairo's stream surfaces: appends to the struct text_out of core/document that is its context. */
cairo_status_t canvas_stream(void *context, const unsigned char *data, unsigned length);

/* An axis from `low` to `high` with ticks at 1, 2 or 5 times a power of ten (Heckbert 1990, "Nice numbers for
 * graph labels"). */
struct axis {
    double low, high;
    size_t ticks;
    double tick[TICKS_MAX];
    int decimals;
};
/* At most `most` ticks, all inside; from_zero widens the range to 0; `widen` moves the ends out to ticks. */
struct axis axis_make(double low, double high, int most, bool from_zero, bool widen);
/* A plot in a box: value to pixel. */
struct plot {
    struct box area;
    struct axis x, y;
};
double plot_x(const struct plot *plot, double value);
double plot_y(const struct plot *plot, double value);
/* Frame, grid, tick texts; x_title NULL: no texts below. The title of y stands above the plot's left end. */
void plot_frame(struct canvas *canvas, const struct plot *plot, const char *x_title, const char *y_title);
void plot_curve(struct canvas *canvas, const struct plot *plot, const double *x, const double *y,
                size_t count, enum ink ink, double line_width, bool dashed);
void plot_band(struct canvas *canvas, const struct plot *plot, const double *x, const double *low,
               const double *high, size_t count, enum ink ink, double alpha);

#endif
