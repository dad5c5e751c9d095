/* A muscle at a glance: force-frequency, recruitment, staircase, recovery. The goal of this code: whether a
 * rate, a strength and a rest make sense for this muscle, before any plan. */
#include "core/predict/curves.h"
#include "core/figure/canvas.h"

#include <math.h>
#include <stdio.h>

static struct plot quarter(const struct canvas *canvas, double width, double height, int column, int row)
{
    const double line_height = canvas_line_height(canvas), left = 56 * canvas->scale, top = 1.8 * line_height,
                 bottom = 2.5 * line_height;
    const double right = 18 * canvas->scale;
    return (struct plot){.area = {column * width / 2 + left, row * height / 2 + top, width / 2 - left - right,
                                  height / 2 - top - bottom}};
}

static void draw_frequency(struct canvas *canvas, struct plot plot, const struct curves *curves)
{
    const size_t n = curves->frequencies, at = n * 3 / 4;
    double most = 1;
    for (size_t i = 0; i < n; i++) most = fmax(most, curves->rested_n[i]);
    plot.x = axis_make(0, curves->frequency_pps[n - 1], 6, true, false);
    plot.y = axis_make(0, most * 1.08, 5, true, true);
    plot_frame(canvas, &plot, "pulse frequency, Hz", "Peak force of a 1-s train, N");
    plot_curve(canvas, &plot, curves->frequency_pps, curves->rested_n, n, INK_BLUE, 2.2, false);
    if (curves->has_dormant)
        plot_curve(canvas, &plot, curves->frequency_pps, curves->dormant_n, n, INK_QUIET, 1.6, true);
    if (curves->has_tired)
        plot_curve(canvas, &plot, curves->frequency_pps, curves->tired_n, n, INK_VERMILION, 1.6, false);
    (void)canvas_label(canvas, "rested", plot_x(&plot, curves->frequency_pps[at]),
                       plot_y(&plot, curves->rested_n[at]), plot.area, INK_BLUE);
    if (curves->has_tired)
        (void)canvas_label(canvas, "tired", plot_x(&plot, curves->frequency_pps[at]),
                           plot_y(&plot, curves->tired_n[at]), plot.area, INK_VERMILION);
    const size_t low = n / 5;
    if (curves->has_dormant)
        (void)canvas_label(canvas, "dormant", plot_x(&plot, curves->frequency_pps[low]),
                           plot_y(&plot, curves->dormant_n[low]) + 8, plot.area, INK_QUIET);
}

static void draw_recruitment(struct canvas *canvas, struct plot plot, const struct curves *curves)
{
    char text[48];
    plot.x = axis_make(curves->durations ? curves->duration_us[0] : 0,
                       curves->durations ? curves->duration_us[curves->durations - 1] : 1000, 6, true, false);
    plot.y = axis_make(0, 1, 6, true, false);
    plot_frame(canvas, &plot, "phase duration, us", "Share of motor units recruited");
    for (size_t c = 0; c < curves->currents; c++) {
        const size_t at = curves->durations / 4 + c * curves->durations / 8;
        plot_curve(canvas, &plot, curves->duration_us, curves->recruited[c], curves->durations, INK_BLUE,
                   1.2 + 0.3 * (double)c, c % 2 == 1);
        (void)snprintf(text, sizeof text, "%.3g mA", curves->current_ma[c]);
        (void)canvas_label(canvas, text, plot_x(&plot, curves->duration_us[at]),
                           plot_y(&plot, curves->recruited[c][at]), plot.area, INK_TEXT);
    }
    if (curves->currents == 0)
        (void)canvas_label(canvas, "every pulse recruits all", plot.area.x + 20,
                           plot.area.y + plot.area.height / 2, plot.area, INK_TEXT);
}

static void draw_staircase(struct canvas *canvas, struct plot plot, const struct curves *curves)
{
    double most = 1;
    for (size_t i = 0; i < curves->staircase; i++) most = fmax(most, curves->staircase_n[i]);
    plot.x = axis_make(0, curves->staircase_s[curves->staircase - 1], 6, true, false);
    plot.y = axis_make(0, most * 1.08, 5, true, true);
    plot_frame(canvas, &plot, "time, s", "Peaks of twitches at 2 Hz, N");
    canvas_ink(canvas, INK_BLUE, 1);
    for (size_t i = 0; i < curves->staircase; i++) {
        cairo_arc(canvas->cairo, plot_x(&plot, curves->staircase_s[i]), plot_y(&plot, curves->staircase_n[i]),
                  2.1 * canvas->scale, 0, 6.2832);
        cairo_fill(canvas->cairo);
    }
}

static void draw_recovery(struct canvas *canvas, struct plot plot, const struct curves *curves)
{
    const size_t at = curves->recovery / 3;
    plot.x = axis_make(0, curves->recovery_s[curves->recovery - 1], 6, true, false);
    plot.y = axis_make(0, 1, 6, true, false);
    plot_frame(canvas, &plot, "rest, s", "Remaining force after a bout, share of rest");
    plot_curve(canvas, &plot, curves->recovery_s, curves->remaining_50, curves->recovery, INK_BLUE, 2.2,
               false);
    plot_curve(canvas, &plot, curves->recovery_s, curves->remaining_20, curves->recovery, INK_VERMILION, 1.6,
               true);
    (void)canvas_label(canvas, "at 50 Hz", plot_x(&plot, curves->recovery_s[at]),
                       plot_y(&plot, curves->remaining_50[at]), plot.area, INK_BLUE);
    (void)canvas_label(canvas, "at 20 Hz", plot_x(&plot, curves->recovery_s[at]),
                       plot_y(&plot, curves->remaining_20[at]), plot.area, INK_VERMILION);
    if (curves->bout[0])
        (void)canvas_label(canvas, curves->bout, plot.area.x + 4, plot.area.y + plot.area.height - 4,
                           plot.area, INK_QUIET);
}

void figure_curves_draw(cairo_t *cairo, double width, double height, const struct curves *curves,
                        const struct figure_style *style)
{
    struct canvas canvas = canvas_begin(cairo, width, height, style);
    if (curves->frequencies) draw_frequency(&canvas, quarter(&canvas, width, height, 0, 0), curves);
    draw_recruitment(&canvas, quarter(&canvas, width, height, 1, 0), curves);
    if (curves->staircase) draw_staircase(&canvas, quarter(&canvas, width, height, 0, 1), curves);
    if (curves->recovery) draw_recovery(&canvas, quarter(&canvas, width, height, 1, 1), curves);
    canvas_foot(&canvas, height, style);
}
