/* The session strip and the dose ledger. The goal of this code: how long the force lasts, and how near each
 * limit the plan comes. */
#include "core/figure/canvas.h"

#include <math.h>
#include <stdio.h>
#include <string.h>

static unsigned contractions_of(const struct plan_channel *channel)
{
    return channel->blocks
               ? channel->block[channel->blocks - 1].first + channel->block[channel->blocks - 1].count - 1
               : 0;
}

/* Mean of a contraction inside its block: first and last are known, between them it runs straight. */
static double mean_of(const struct plan_block *block, unsigned number)
{
    const double share = block->count > 1 ? (double)(number - block->first) / (block->count - 1) : 0;
    return block->recount.mean_n_first + share * (block->recount.mean_n_last - block->recount.mean_n_first);
}

static void draw_bars(struct canvas *canvas, const struct plot *plot, const struct plan *plan,
                      const struct plan_channel *channel, unsigned chosen)
{
    const double wide = plot->area.width / (plot->x.high - plot->x.low);
    for (size_t b = 0; b < channel->blocks; b++) {
        const struct plan_block *block = &channel->block[b];
        for (unsigned number = block->first; number < block->first + block->count; number++) {
            const double mean_n = mean_of(block, number), x = plot_x(plot, number - 0.5),
                         y = plot_y(plot, mean_n);
            const bool missed = plan->first_miss && number >= plan->first_miss && !block->warm_up;
            canvas_ink(canvas,
                       number == chosen ? INK_TEXT
                       : missed         ? INK_VERMILION
                                        : INK_BLUE,
                       block->warm_up ? 0.35
                       : missed       ? 0.75
                                      : 0.9);
            const double gap = fmin(1.5, 0.15 * wide);
            if (missed) { /* also told without colour: hollow */
                cairo_set_line_width(canvas->cairo, fmin(1.2 * canvas->scale, 0.4 * wide));
                cairo_rectangle(canvas->cairo, x + gap, y, fmax(wide - 2 * gap, 0.6), plot_y(plot, 0) - y);
                cairo_stroke(canvas->cairo);
            } else {
                cairo_rectangle(canvas->cairo, x + gap, y, fmax(wide - 2 * gap, 0.6), plot_y(plot, 0) - y);
                cairo_fill(canvas->cairo);
            }
        }
    }
}

static void draw_remaining(struct canvas *canvas, const struct plot *plot, const struct plan_channel *channel)
{
    double last_x = plot->area.x, last_y = plot_y(plot, 100);
    canvas_ink(canvas, INK_GREEN, 1);
    cairo_set_line_width(canvas->cairo, 1.8 * canvas->scale);
    cairo_move_to(canvas->cairo, last_x, last_y);
    for (size_t b = 0; b < channel->blocks; b++) {
        last_x = plot_x(plot, channel->block[b].first + channel->block[b].count - 0.5);
        last_y = plot_y(plot, 100 * channel->block[b].recount.remaining_50);
        cairo_line_to(canvas->cairo, last_x, last_y);
    }
    cairo_stroke(canvas->cairo);
}

void figure_session_draw(cairo_t *cairo, double width, double height, const struct plan *plan,
                         unsigned chosen, const struct figure_style *style)
{
    struct canvas canvas = canvas_begin(cairo, width, height, style);
    const struct plan_channel *channel = plan->channels ? &plan->channel[0] : NULL;
    const unsigned contractions = channel ? contractions_of(channel) : 0;
    const double line_height = canvas_line_height(&canvas), left = 58 * canvas.scale,
                 right = 18 * canvas.scale;
    if (contractions == 0) {
        canvas_ink(&canvas, INK_TEXT, 1);
        (void)canvas_text(&canvas, plan->verdict, left, line_height, TEXT_LEFT, 1, true);
        return;
    }
    double most = isnan(plan->target_n) ? 1 : plan->target_n * 1.1;
    for (size_t b = 0; b < channel->blocks; b++) most = fmax(most, channel->block[b].recount.mean_n_high);
    const double top = 2.9 * line_height, bottom = 2.4 * line_height,
                 room = fmax(height - top - bottom - 1.8 * line_height, 60);
    struct plot means = {{left, top, width - left - right, 0.62 * room},
                         axis_make(0.5, contractions + 0.5, 12, false, false),
                         axis_make(0, most * 1.04, 4, true, true)};
    struct plot rest = {{left, top + 0.62 * room + 1.8 * line_height, width - left - right, 0.38 * room},
                        means.x,
                        axis_make(0, 100, 3, true, false)};
    canvas_ink(&canvas, INK_TEXT, 1);
    (void)canvas_text(&canvas, plan->verdict, left, 4 * canvas.scale, TEXT_LEFT, 1.08, true);
    plot_frame(&canvas, &means, NULL, "Mean force of each contraction, N (hollow: missed)");
    plot_frame(&canvas, &rest, "contraction", "Remaining force at 50 Hz, % of rest");
    draw_bars(&canvas, &means, plan, channel, chosen);
    if (!isnan(plan->target_n)) {
        const double edge[2] = {means.x.low, means.x.high}, target[2] = {plan->target_n, plan->target_n};
        char text[48];
        plot_curve(&canvas, &means, edge, target, 2, INK_GREEN, 1.6, true);
        (void)snprintf(text, sizeof text, "target %.3g N", plan->target_n);
        (void)canvas_label(&canvas, text, means.area.x + means.area.width - 4, plot_y(&means, plan->target_n),
                           means.area, INK_GREEN);
    }
    draw_remaining(&canvas, &rest, channel);
    canvas_foot(&canvas, height, style);
}
