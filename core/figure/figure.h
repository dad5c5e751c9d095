/* Figures, drawn on any cairo surface: the screen, the PNG and the printed sheet are the same picture. At
 * most three hues, direct labels, readable in black and white. Sizes in points of the surface; text by Pango.
 */
#ifndef PULSEWRIGHT_CORE_FIGURE_FIGURE_H
#define PULSEWRIGHT_CORE_FIGURE_FIGURE_H
#include "core/document/plan_document.h"
#include "core/document/profile.h"
#include "core/predict/predict.h"
#include "core/status/status.h"
#include <cairo.h>

struct figure_style {
    bool dark;
    double scale; /* 1: 14 px text */
    const char
        *approval; /* at the foot: the NOT SIGNED text, or who signed; NULL: it is in sight elsewhere */
};

/* The score: pulses, activation, force on one time axis. Anything may be NULL/NAN where there is none. */
struct figure_score {
    const struct train_pulse *pulses;
    size_t pulse_count;
    const struct trace *trace;
    double from_ms, to_ms;                  /* shown time */
    double target_n, tolerance_percent;     /* NAN: none */
    double hold_from_ms, hold_to_ms;        /* NAN: none */
    const double *measured_ms, *measured_n; /* recorded force laid over */
    size_t measured_count;
    const double *band_low_n, *band_high_n; /* at the trace's samples */
    double cursor_ms;                       /* NAN: none */
    const char *title;
};
void figure_score_draw(cairo_t *cairo, double width, double height, const struct figure_score *score,
                       const struct figure_style *style);

/* A muscle at a glance: force-frequency, recruitment, staircase, recovery. Filled by curves_make in
 * core/predict/curves.h. */
struct curves;
void figure_curves_draw(cairo_t *cairo, double width, double height, const struct curves *curves,
                        const struct figure_style *style);
void figure_session_draw(cairo_t *cairo, double width, double height, const struct plan *plan,
                         unsigned chosen, const struct figure_style *style);
void figure_ledger_draw(cairo_t *cairo, double width, double height, const struct ledger *ledger,
                        const struct figure_style *style);

/* Draws into a file by its ending (.png, .svg, .pdf), via `draw`. */
enum status figure_write(const char *path, double width, double height,
                         void (*draw)(cairo_t *, double, double, const void *), const void *context,
                         bool replace, struct message *why);

#endif
