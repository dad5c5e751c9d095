/* The score view. The goal of this code: what will these pulses do? Every change is predicted before the next
 * frame. */
#include "gui/view/score_view.h"

#include "core/plan/plan.h"
#include "core/report/option.h"
#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

enum { PULSES_MAX = 200000 };
static const char *const openings[] = {"single", "doublet", "triplet", NULL};
static const char *const patterns[] = {"singles", "doublets", NULL};
static const char *const shapes[] = {"linear", "raised-cosine", "exponential", NULL};

static const struct profile_muscle *muscle_of(const struct score_view *view)
{
    return &view->profile.muscle[view->settings.muscle];
}

static struct contraction contraction_of(const struct score_settings *settings)
{
    return (struct contraction){
        .frequency_pps = settings->frequency_pps,
        .opening = (unsigned)settings->opening + 1,
        .pairs = settings->pattern == 1,
        .opening_gap_ms = 5,
        .duration_us = settings->duration_us,
        .current_ma = settings->current_ma,
        .trim_duration_us = (double)NAN,
        .trim_current_ma = (double)NAN,
        .ramp_up = {.shape = (enum ramp_shape)settings->shape, .ms = settings->ramp_up_ms},
        .ramp_down = {.shape = (enum ramp_shape)settings->shape, .ms = settings->ramp_down_ms},
        .hold_ms = settings->hold_ms,
        .rest_ms = settings->rest_ms,
        .repeat = (unsigned)settings->contractions};
}

static enum status make_pulses(struct score_view *view, struct message *why)
{
    const struct contraction contraction = contraction_of(&view->settings);
    const struct recruitment *recruitment = &muscle_of(view)->parameters.recruitment;
    size_t count = 0;
    view->pulse_count = 0;
    enum status status = contraction_pulses(&contraction, recruitment, view->pulses, PULSES_MAX, &count, why);
    if (status != STATUS_OK) return status;
    if (count * contraction.repeat > PULSES_MAX)
        return status_fail(why, STATUS_REFUSED, "more than %d pulses: fewer contractions, please",
                           PULSES_MAX);
    view->pulse_count = count;
    for (unsigned k = 1; k < contraction.repeat && count; k++) {
        const double start_ms = view->pulses[view->pulse_count - 1].time_ms + contraction.rest_ms;
        for (size_t i = 0; i < count; i++) {
            view->pulses[view->pulse_count] = view->pulses[i];
            view->pulses[view->pulse_count++].time_ms += start_ms;
        }
    }
    return STATUS_OK;
}

/* The plan's pulses by the one expansion, the first channel's. */
static enum status take_plan_pulses(struct score_view *view, struct message *why)
{
    struct segment *segments = NULL;
    size_t count = 0;
    const struct train_grid grid = stimulator_grid(&view->plan.stimulator);
    const enum status status = plan_segments(&view->plan, &segments, &count, why);
    if (status != STATUS_OK) return status;
    view->pulse_count = 0;
    for (size_t i = 0; i < count; i++) {
        struct segment_cursor cursor;
        struct pulse pulse;
        if (segments[i].channel != view->plan.channel[0].channel) continue;
        segment_begin(&cursor, &segments[i], &grid);
        while (segment_next(&cursor, &pulse) && view->pulse_count < PULSES_MAX)
            view->pulses[view->pulse_count++] = (struct train_pulse){
                (double)pulse.at_us / 1e3, pulse.duration_us, (double)pulse.current_ua / 1e3};
    }
    free(segments);
    return STATUS_OK;
}

static void choose_window(struct score_view *view)
{
    const double last_ms = view->pulse_count ? view->pulses[view->pulse_count - 1].time_ms : 1000;
    view->from_ms = 0;
    view->to_ms = fmin(last_ms + 500, 12000);
    if (!view->has_plan || view->chosen < 1 || view->chosen > view->starts) {
        (void)snprintf(view->title, sizeof view->title, "%s", muscle_of(view)->name);
        return;
    }
    view->from_ms = fmax(0, view->starts_ms[view->chosen - 1] - 200);
    view->to_ms = view->chosen < view->starts ? view->starts_ms[view->chosen] : last_ms + 1000;
    (void)snprintf(view->title, sizeof view->title, "%s, contraction %u of %zu", view->plan.channel[0].muscle,
                   view->chosen, view->starts);
}

/* A long session is sampled more coarsely: a screen shows no more. */
static void predict(struct score_view *view)
{
    struct message why = {""};
    enum status status = profile_muscle_usable(muscle_of(view), &why);
    if (status == STATUS_OK && !view->has_plan) status = make_pulses(view, &why);
    trace_free(&view->trace);
    view->predicted = false;
    if (status == STATUS_OK && view->pulse_count == 0)
        status = status_fail(&why, STATUS_REFUSED, "no pulse at these settings");
    if (status == STATUS_OK) {
        const double until_ms = view->pulses[view->pulse_count - 1].time_ms + 1000;
        const struct trace_options options = {
            .step_ms = fmax(1, floor(until_ms / 300000)),
            .until_ms = until_ms,
            .window_from_ms = view->has_plan ? (double)NAN : view->settings.ramp_up_ms,
            .window_to_ms =
                view->has_plan ? (double)NAN : view->settings.ramp_up_ms + view->settings.hold_ms};
        status = predict_trace(&muscle_of(view)->parameters, view->pulses, view->pulse_count, NULL, &options,
                               &view->trace, &view->summary, &why);
    }
    view->predicted = status == STATUS_OK;
    (void)snprintf(view->fault, sizeof view->fault, "%s", status == STATUS_OK ? "" : why.text);
    choose_window(view);
}

static void take_train(struct score_view *view, const struct train *train)
{
    struct score_settings *settings = &view->settings;
    const struct profile_muscle *muscle = muscle_of(view);
    *settings = (struct score_settings){.frequency_pps = 30,
                                        .duration_us = 300,
                                        .current_ma = 40,
                                        .ramp_up_ms = 400,
                                        .hold_ms = 1500,
                                        .ramp_down_ms = 300,
                                        .rest_ms = 1500,
                                        .contractions = 2,
                                        .muscle = settings->muscle,
                                        .shape = RAMP_RAISED_COSINE};
    if (muscle->has_found) {
        settings->duration_us = muscle->found.duration_us;
        settings->current_ma = floor((muscle->found.threshold_ma + muscle->found.comfort_ma));
        settings->current_ma = floor(settings->current_ma) / 2;
    }
    if (muscle->parameters.recruitment.law == RECRUITMENT_DURATION_EXPONENTIAL)
        settings->current_ma = muscle->parameters.recruitment.current_ma;
    if (!train || train->contractions == 0 || train->contraction[0].gaps) return;
    const struct contraction *first = &train->contraction[0];
    *settings = (struct score_settings){
        first->frequency_pps, first->duration_us,      first->current_ma, first->ramp_up.ms,
        first->hold_ms,       first->ramp_down.ms,     first->rest_ms,    first->repeat,
        settings->muscle,     (int)first->opening - 1, first->pairs,      (int)first->ramp_up.shape};
}

static enum status take_starts(struct score_view *view, struct message *why)
{
    unsigned last = 0;
    const struct plan_channel *channel = &view->plan.channel[0];
    if (channel->blocks)
        last = channel->block[channel->blocks - 1].first + channel->block[channel->blocks - 1].count - 1;
    view->starts_ms = calloc(last + 1u, sizeof *view->starts_ms);
    if (!view->starts_ms) return status_fail(why, STATUS_INTERNAL, "no memory");
    for (unsigned n = 1; n <= last; n++) {
        uint64_t start_us = 0;
        const enum status status = plan_contraction_start_us(&view->plan, 0, n, &start_us, why);
        if (status != STATUS_OK) return status;
        view->starts_ms[n - 1] = (double)start_us / 1e3;
        view->starts = n;
    }
    view->chosen = last ? 1 : 0;
    return STATUS_OK;
}

enum status score_view_init(struct score_view *view, struct profile *profile, const char *muscle,
                            const struct train *train, struct plan *plan, const struct stimulator *stimulator,
                            struct message *why)
{
    memset(view, 0, sizeof *view);
    view->profile = *profile;
    *profile = (struct profile){.person = ""};
    const char *wanted = plan && plan->channels ? plan->channel[0].muscle : muscle;
    const struct profile_muscle *found =
        wanted ? profile_muscle(&view->profile, wanted, why) : &view->profile.muscle[0];
    view->pulses = calloc(PULSES_MAX, sizeof *view->pulses);
    enum status status = !found         ? STATUS_DOCUMENT
                         : view->pulses ? STATUS_OK
                                        : status_fail(why, STATUS_INTERNAL, "no memory");
    for (size_t i = 0; i < view->profile.muscles; i++) view->muscle_names[i] = view->profile.muscle[i].name;
    if (found) view->settings.muscle = (int)(found - view->profile.muscle);
    if (stimulator) view->stimulator = *stimulator;
    view->has_stimulator = stimulator != NULL;
    if (status == STATUS_OK && plan) {
        view->plan = *plan;
        *plan = (struct plan){.person = ""};
        view->has_plan = true;
        status = take_plan_pulses(view, why);
        if (status == STATUS_OK) status = take_starts(view, why);
    }
    if (status != STATUS_OK) {
        score_view_free(view);
        return status;
    }
    take_train(view, train);
    predict(view);
    return STATUS_OK;
}

void score_view_free(struct score_view *view)
{
    free(view->pulses);
    free(view->starts_ms);
    trace_free(&view->trace);
    profile_free(&view->profile);
    if (view->has_plan) plan_free(&view->plan);
    memset(view, 0, sizeof *view);
}

static void remember(struct score_settings *kept, size_t *count, const struct score_settings *settings)
{
    if (*count == SCORE_UNDO_MAX) {
        memmove(kept, kept + 1, (SCORE_UNDO_MAX - 1) * sizeof *kept);
        (*count)--;
    }
    kept[(*count)++] = *settings;
}

static bool undo_and_redo(struct score_view *view, struct ui *ui)
{
    if (ui_key_taken(ui, UI_KEY_UNDO) && view->undos) {
        remember(view->redo, &view->redos, &view->settings);
        view->settings = view->undo[--view->undos];
        return true;
    }
    if (ui_key_taken(ui, UI_KEY_REDO) && view->redos) {
        remember(view->undo, &view->undos, &view->settings);
        view->settings = view->redo[--view->redos];
        return true;
    }
    return false;
}

struct column {
    struct ui *ui;
    double x, y, width, row;
};

static struct ui_box next_row(struct column *column)
{
    const struct ui_box box = {column->x, column->y, column->width, column->row * 0.84};
    column->y += column->row;
    return box;
}

static bool edit_fields(struct score_view *view, struct column *column)
{
    struct ui *ui = column->ui;
    struct score_settings *s = &view->settings;
    const struct stimulator *d = view->has_stimulator ? &view->stimulator : NULL;
    bool changed = false;
    if (view->profile.muscles > 1)
        changed |= ui_choice(ui, next_row(column), "Muscle", view->muscle_names, &s->muscle);
    changed |= ui_number(ui, next_row(column), "Frequency", "Hz", d ? d->frequency_pps.from : 1,
                         d ? d->frequency_pps.to : 120, d ? d->frequency_pps.step : 1, &s->frequency_pps);
    changed |=
        ui_number(ui, next_row(column), "Phase duration", "\xC2\xB5s", d ? fmax(d->duration_us.from, 1) : 10,
                  d ? d->duration_us.to : 1000, d ? d->duration_us.step : 5, &s->duration_us);
    changed |= ui_number(ui, next_row(column), "Current", "mA", d ? d->current_ma.from : 0,
                         d ? d->current_ma.to : 200, d ? d->current_ma.step : 0.5, &s->current_ma);
    changed |= ui_choice(ui, next_row(column), "Opening", openings, &s->opening);
    changed |= ui_choice(ui, next_row(column), "Pattern", patterns, &s->pattern);
    changed |= ui_choice(ui, next_row(column), "Ramp", shapes, &s->shape);
    changed |= ui_number(ui, next_row(column), "Ramp up", "ms", 0, 5000, 50, &s->ramp_up_ms);
    changed |= ui_number(ui, next_row(column), "Hold", "ms", 50, 20000, 50, &s->hold_ms);
    changed |= ui_number(ui, next_row(column), "Ramp down", "ms", 0, 5000, 50, &s->ramp_down_ms);
    changed |= ui_number(ui, next_row(column), "Rest", "ms", 50, 60000, 50, &s->rest_ms);
    changed |= ui_number(ui, next_row(column), "Contractions", "", 1, 100, 1, &s->contractions);
    return changed;
}

static void show_figures(const struct score_view *view, struct column *column)
{
    char text[UI_TEXT_SIZE];
    struct ui *ui = column->ui;
    if (ui->complaint[0]) ui_words(ui, next_row(column), ui->complaint, UI_WARNING, UI_LEFT, true);
    column->y += 0.3 * column->row;
    if (!view->predicted) {
        ui_words(ui, next_row(column), view->fault, UI_WARNING, UI_LEFT, true);
        return;
    }
    const struct trace_summary *s = &view->summary;
    (void)snprintf(text, sizeof text, "Peak %.4g N after %.4g ms", s->peak_n, s->time_to_peak_ms);
    ui_words(ui, next_row(column), text, UI_TEXT, UI_LEFT, true);
    (void)snprintf(text, sizeof text, "Mean of the hold %.4g N", s->mean_n);
    ui_words(ui, next_row(column), text, UI_TEXT, UI_LEFT, false);
    if (isnan(s->ripple_percent) || isnan(s->fusion_index))
        (void)snprintf(text, sizeof text, "Ripple: too weak to tell");
    else
        (void)snprintf(text, sizeof text, "Ripple %.3g %%, fusion index %.2f", s->ripple_percent,
                       s->fusion_index);
    ui_words(ui, next_row(column), text, UI_TEXT, UI_LEFT, false);
    (void)snprintf(text, sizeof text, "Remaining force at 50 Hz %.0f %%", 100 * s->force_remaining_50_end);
    ui_words(ui, next_row(column), text, UI_TEXT, UI_LEFT, false);
}

static void header(const struct score_view *view, struct ui *ui, double height)
{
    char text[UI_TEXT_SIZE];
    const struct ui_box bar = {0, 0, ui->width, height};
    const double pad = 12 * ui->scale;
    ui_fill(ui, bar, UI_BANNER);
    (void)snprintf(text, sizeof text, "%.20s   %.30s   %.30s", view->profile.person, muscle_of(view)->name,
                   view->has_plan         ? view->plan.stimulator.name
                   : view->has_stimulator ? view->stimulator.name
                                          : "");
    ui_words(ui, (struct ui_box){pad, 0, ui->width * 0.31, height}, text, UI_BANNER_TEXT, UI_LEFT, true);
    ui_words(ui, (struct ui_box){ui->width * 0.31, 0, ui->width * 0.61, height}, NOT_SIGNED_TEXT,
             UI_BANNER_TEXT, UI_CENTRE, false);
    ui_words(ui, (struct ui_box){ui->width * 0.92, 0, ui->width * 0.08, height}, "no link", UI_BANNER_TEXT,
             UI_RIGHT, false);
}

static void plan_side(struct score_view *view, struct ui *ui, struct column *column, struct ui_box right)
{
    const unsigned before = view->chosen;
    char text[UI_TEXT_SIZE];
    double chosen = view->chosen, x, y;
    (void)snprintf(text, sizeof text, "%.150s", view->plan.verdict);
    ui_words(ui, next_row(column), text, UI_TEXT, UI_LEFT, true);
    if (view->starts &&
        ui_number(ui, next_row(column), "Contraction", "", 1, (double)view->starts, 1, &chosen))
        view->chosen = (unsigned)chosen;
    column->y += 0.4 * column->row;
    const struct ui_box ledger = {column->x, column->y, column->width,
                                  fmax(ui->height - column->y - 3 * column->row, 40)};
    ui_figure(ui, ledger, SCORE_FIGURE_LEDGER);
    const struct ui_box strip = {right.x, right.y + 0.62 * right.height, right.width, 0.38 * right.height};
    ui_figure(ui, (struct ui_box){right.x, right.y, right.width, 0.62 * right.height}, SCORE_FIGURE_SCORE);
    ui_figure(ui, strip, SCORE_FIGURE_SESSION);
    if (view->starts &&
        ui_area(ui, strip, &x, &y)) { /* the strip's plot begins and ends a little inside its box */
        const double left = 58 * ui->scale / strip.width, wide = 1 - (58 + 18) * ui->scale / strip.width;
        const double number = ceil((x - left) / wide * (double)view->starts);
        view->chosen = (unsigned)fmin(fmax(number, 1), (double)view->starts);
    }
    if (view->chosen != before) choose_window(view);
}

void score_view_frame(struct score_view *view, struct ui *ui)
{
    const double bar = 40 * ui->scale, side = fmin(330 * ui->scale, 0.36 * ui->width), pad = 12 * ui->scale;
    const struct ui_box right = {side, bar, ui->width - side, ui->height - bar};
    struct column column = {ui, pad, bar + pad, side - 2 * pad,
                            fmin(31 * ui->scale, (ui->height - bar - 2 * pad) / 20)};
    const struct score_settings before = view->settings;
    ui_fill(ui, (struct ui_box){0, 0, ui->width, ui->height}, UI_PAPER);
    ui_fill(ui, (struct ui_box){0, bar, side, ui->height - bar}, UI_PANEL);
    header(view, ui, bar);
    if (view->has_plan) {
        plan_side(view, ui, &column, right);
    } else {
        if (edit_fields(view, &column)) {
            remember(view->undo, &view->undos, &before);
            view->redos = 0;
            predict(view);
        } else if (undo_and_redo(view, ui)) {
            predict(view);
        }
        show_figures(view, &column);
        ui_figure(ui, right, SCORE_FIGURE_SCORE);
    }
    column.y = ui->height - 2.2 * column.row;
    ui_words(ui, next_row(&column), "A prediction: nothing is sent from here.", UI_QUIET, UI_LEFT, false);
    ui_words(ui, next_row(&column), "Find the strength from zero.", UI_QUIET, UI_LEFT, false);
}

static void draw_score(const struct score_view *view, cairo_t *cairo, double width, double height,
                       const struct figure_style *style)
{
    /* only what is shown: a session has a million samples */
    const double step_ms = view->trace.samples > 1 ? view->trace.time_ms[1] - view->trace.time_ms[0] : 1;
    const size_t from =
        view->predicted ? (size_t)fmin((double)view->trace.samples, fmax(0, view->from_ms / step_ms)) : 0;
    const size_t to =
        view->predicted ? (size_t)fmin((double)view->trace.samples, view->to_ms / step_ms + 1) : 0;
    struct trace part = view->trace;
    part.samples = to > from ? to - from : 0;
    part.time_ms += from;
    part.force_n += from;
    part.capacity += from;
    part.potentiation += from;
    if (part.activation) part.activation += from;
    size_t first = 0, last = view->pulse_count;
    while (first < last && view->pulses[first].time_ms < view->from_ms) first++;
    while (last > first && view->pulses[last - 1].time_ms > view->to_ms) last--;
    const struct figure_score score = {.pulses = view->pulses + first,
                                       .pulse_count = last - first,
                                       .trace = view->predicted ? &part : NULL,
                                       .from_ms = view->from_ms,
                                       .to_ms = view->to_ms,
                                       .target_n = view->has_plan ? view->plan.target_n : (double)NAN,
                                       .tolerance_percent = view->has_plan && view->plan.demand.contractions
                                                                ? view->plan.demand.tolerance_percent
                                                                : 5,
                                       .hold_from_ms = (double)NAN,
                                       .hold_to_ms = (double)NAN,
                                       .cursor_ms = (double)NAN,
                                       .title = view->title};
    figure_score_draw(cairo, width, height, &score, style);
}

void score_view_draw(const struct score_view *view, int figure, cairo_t *cairo, double width, double height,
                     double scale)
{
    const struct figure_style style = {.dark = view->dark, .scale = scale};
    if (figure == SCORE_FIGURE_SCORE) draw_score(view, cairo, width, height, &style);
    if (figure == SCORE_FIGURE_SESSION)
        figure_session_draw(cairo, width, height, &view->plan, view->chosen, &style);
    if (figure == SCORE_FIGURE_LEDGER) figure_ledger_draw(cairo, width, height, &view->plan.ledger, &style);
}
