/* The score: pulses, activation, force, staves over one time axis. The goal of this code: what the pulses
 * will do, at a look. */
#include "core/figure/canvas.h"

#include <math.h>
#include <stdio.h>
#include <stdlib.h>

struct staves {
    struct plot pulses, activation, force;
    double per_s; /* milliseconds in a unit of the time axis */
};

static double greatest(const double *values, size_t count, double least)
{
    for (size_t i = 0; i < count; i++)
        if (isfinite(values[i]) && values[i] > least) least = values[i];
    return least;
}

static struct staves lay_out(const struct canvas *canvas, double width, double height,
                             const struct figure_score *score, bool titled)
{
    const double line_height = canvas_line_height(canvas), left = 58 * canvas->scale,
                 right = 18 * canvas->scale;
    const double top = (titled ? 2.4 : 1.5) * line_height, bottom = 2.4 * line_height,
                 between = 1.6 * line_height;
    const double room = fmax(height - top - bottom - 2 * between, 90);
    struct staves staves = {.per_s = score->to_ms - score->from_ms > 3000 ? 1000 : 1};
    const struct axis time = axis_make(score->from_ms / staves.per_s, score->to_ms / staves.per_s,
                                       (int)fmax(4, width / (110 * canvas->scale)), false, false);
    double current_ma = 0,
           force_n = isnan(score->target_n) ? 0 : score->target_n * (1 + score->tolerance_percent / 100);
    for (size_t i = 0; i < score->pulse_count; i++)
        current_ma = fmax(current_ma, score->pulses[i].current_ma);
    if (score->trace) force_n = greatest(score->trace->force_n, score->trace->samples, force_n);
    force_n = greatest(score->measured_n, score->measured_count, force_n);
    if (score->trace && score->band_high_n)
        force_n = greatest(score->band_high_n, score->trace->samples, force_n);
    staves.pulses = (struct plot){{left, top, width - left - right, 0.22 * room},
                                  time,
                                  axis_make(0, fmax(current_ma, 1), 3, true, true)};
    staves.activation = (struct plot){{left, top + 0.22 * room + between, width - left - right, 0.20 * room},
                                      time,
                                      axis_make(0, 1, 3, true, true)};
    staves.force = (struct plot){
        {left, top + 0.42 * room + 2 * between, width - left - right, 0.58 * room},
        time,
        axis_make(0, fmax(force_n * 1.06, 1), (int)fmax(3, room / (70 * canvas->scale)), true, true)};
    return staves;
}

/* Each pulse a stroke: height its current, breadth its duration (drawn many times broader than true, at least
 * a hair). */
static void draw_pulses(struct canvas *canvas, const struct plot *plot, const struct figure_score *score,
                        double per_s)
{
    const double base = plot_y(plot, 0);
    const double spacing = score->pulse_count > 1 ? plot->area.width / (double)score->pulse_count : 12;
    canvas_ink(canvas, INK_BLUE, 1);
    for (size_t i = 0; i < score->pulse_count; i++) {
        const struct train_pulse *pulse = &score->pulses[i];
        if (pulse->time_ms < score->from_ms || pulse->time_ms > score->to_ms) continue;
        const double wide =
            fmax(0.7, fmin(0.7 * spacing, 6 * canvas->scale) * fmin(1, pulse->duration_us / 500));
        const double x = plot_x(plot, pulse->time_ms / per_s), y = plot_y(plot, pulse->current_ma);
        cairo_rectangle(canvas->cairo, x - wide / 2, y, wide, base - y);
    }
    cairo_fill(canvas->cairo);
}

static void scale_times(const double *from, size_t count, double per_s, double *to)
{
    for (size_t i = 0; i < count; i++) to[i] = from[i] / per_s;
}

static void draw_target(struct canvas *canvas, const struct plot *plot, const struct figure_score *score,
                        double per_s)
{
    if (isnan(score->target_n)) return;
    const bool held = !isnan(score->hold_from_ms);
    const double from = plot_x(plot, held ? score->hold_from_ms / per_s : plot->x.low),
                 to = plot_x(plot, held ? score->hold_to_ms / per_s : plot->x.high);
    const double low = plot_y(plot, score->target_n * (1 - score->tolerance_percent / 100)),
                 high = plot_y(plot, score->target_n * (1 + score->tolerance_percent / 100));
    canvas_ink(canvas, INK_GREEN, 0.22);
    cairo_rectangle(canvas->cairo, from, high, to - from, low - high);
    cairo_fill(canvas->cairo);
    canvas_ink(canvas, INK_GREEN, 1);
    cairo_set_line_width(canvas->cairo, 1.4 * canvas->scale);
    cairo_move_to(canvas->cairo, from, plot_y(plot, score->target_n));
    cairo_line_to(canvas->cairo, to, plot_y(plot, score->target_n));
    cairo_stroke(canvas->cairo);
}

static void label_force(struct canvas *canvas, const struct plot *plot, const struct figure_score *score,
                        const double *time)
{
    char text[64];
    size_t peak = 0;
    for (size_t i = 0; i < score->trace->samples; i++)
        if (score->trace->force_n[i] > score->trace->force_n[peak]) peak = i;
    (void)snprintf(text, sizeof text, "peak %.3g N", score->trace->force_n[peak]);
    if (score->trace->samples)
        (void)canvas_label(canvas, text, plot_x(plot, time[peak]), plot_y(plot, score->trace->force_n[peak]),
                           plot->area, INK_TEXT);
    if (isnan(score->target_n)) return;
    (void)snprintf(text, sizeof text, "target %.3g N", score->target_n);
    (void)canvas_label(canvas, text, plot->area.x + plot->area.width - 4, plot_y(plot, score->target_n),
                       plot->area, INK_GREEN);
}

static void draw_trace(struct canvas *canvas, const struct staves *staves, const struct figure_score *score)
{
    const struct trace *trace = score->trace;
    double *time = calloc(trace->samples + score->measured_count + 1, sizeof *time);
    if (!time) return;
    scale_times(trace->time_ms, trace->samples, staves->per_s, time);
    if (trace->activation)
        plot_curve(canvas, &staves->activation, time, trace->activation, trace->samples, INK_BLUE, 1.6,
                   false);
    plot_curve(canvas, &staves->activation, time, trace->potentiation, trace->samples, INK_QUIET, 1.2, true);
    if (score->band_low_n && score->band_high_n)
        plot_band(canvas, &staves->force, time, score->band_low_n, score->band_high_n, trace->samples,
                  INK_BAND, 0.18);
    draw_target(canvas, &staves->force, score, staves->per_s);
    plot_curve(canvas, &staves->force, time, trace->force_n, trace->samples, INK_BLUE, 2.2, false);
    if (score->measured_count) {
        double *measured = time + trace->samples;
        scale_times(score->measured_ms, score->measured_count, staves->per_s, measured);
        plot_curve(canvas, &staves->force, measured, score->measured_n, score->measured_count, INK_VERMILION,
                   1.4, false);
        (void)canvas_label(canvas, "measured", plot_x(&staves->force, measured[score->measured_count - 1]),
                           plot_y(&staves->force, score->measured_n[score->measured_count - 1]),
                           staves->force.area, INK_VERMILION);
    }
    label_force(canvas, &staves->force, score, time);
    free(time);
}

void figure_score_draw(cairo_t *cairo, double width, double height, const struct figure_score *score,
                       const struct figure_style *style)
{
    struct canvas canvas = canvas_begin(cairo, width, height, style);
    const struct staves staves = lay_out(&canvas, width, height, score, score->title != NULL);
    const char *time_title = staves.per_s > 1 ? "time, s" : "time, ms";
    plot_frame(&canvas, &staves.pulses, NULL, "Pulses: current, mA (breadth: phase duration)");
    plot_frame(&canvas, &staves.activation, NULL,
               score->trace ? "Activation (line) and potentiation (dashes), share" : "Activation, share");
    plot_frame(&canvas, &staves.force, time_title, "Force, N");
    if (score->title) {
        canvas_ink(&canvas, INK_TEXT, 1);
        (void)canvas_text(&canvas, score->title, staves.pulses.area.x, 4 * canvas.scale, TEXT_LEFT, 1.08,
                          true);
    }
    draw_pulses(&canvas, &staves.pulses, score, staves.per_s);
    if (score->trace)
        draw_trace(&canvas, &staves, score);
    else
        draw_target(&canvas, &staves.force, score, staves.per_s);
    canvas_foot(&canvas, height, style);
    if (isnan(score->cursor_ms)) return;
    canvas_ink(&canvas, INK_VERMILION, 1);
    cairo_set_line_width(cairo, 1.5 * canvas.scale);
    cairo_move_to(cairo, plot_x(&staves.force, score->cursor_ms / staves.per_s), staves.pulses.area.y);
    cairo_line_to(cairo, plot_x(&staves.force, score->cursor_ms / staves.per_s),
                  staves.force.area.y + staves.force.area.height);
    cairo_stroke(cairo);
}
