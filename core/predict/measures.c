/* Measures of one contraction's hold. The goal of this code: mean, ripple, droop, rise and overshoot exactly
 * as the house defines them, from force between samples. Definitions: this project's (house chapter,
 * "Quantities, said once"). */
#include "core/predict/periods.h"
#include "core/predict/predict.h"
#include "core/predict/predictor.h"

#include "core/muscle/recruitment.h"

#include <math.h>
#include <stdlib.h>

/* Times on one grid differ by rounding only. */
#define SAME_MS 1e-6

struct period {
    double start_ms, end_ms;
    double integral, least, greatest; /* no tone */
};

/* One contraction being measured. */
struct course {
    struct engine *engine;
    double hold_from_ms, hold_to_ms;
    struct gather hold, outside, period;
    struct period *periods;
    size_t count;
    bool open;
    double opened_ms;
};

/* Advances through the corners of the hold, gathering into the period and into the hold or what is outside
 * it. */
static void course_advance(struct course *course, double to_ms)
{
    while (course->engine->time_ms < to_ms) {
        const double now = course->engine->time_ms;
        double end = to_ms;
        if (now < course->hold_from_ms && course->hold_from_ms < end) end = course->hold_from_ms;
        if (now < course->hold_to_ms && course->hold_to_ms < end) end = course->hold_to_ms;
        struct gather piece = gather_empty();
        gather_advance(&piece, course->engine, end);
        const bool inside = now >= course->hold_from_ms && now < course->hold_to_ms;
        gather_add(inside ? &course->hold : &course->outside, &piece);
        gather_add(&course->period, &piece);
    }
}

/* Ends the period that is open (if one is) at the present time. */
static void course_close(struct course *course)
{
    if (course->open && course->engine->time_ms > course->opened_ms) {
        struct period *period = &course->periods[course->count++];
        period->start_ms = course->opened_ms;
        period->end_ms = course->engine->time_ms;
        period->integral = course->period.integral;
        period->least = course->period.least;
        period->greatest = course->period.greatest;
    }
    course->open = false;
}

static void course_open(struct course *course)
{
    course_close(course);
    course->period = gather_empty();
    course->opened_ms = course->engine->time_ms;
    course->open = true;
}

/* From the last pulse to the end of the hold, on a copy: the predictor itself stays at the last pulse. */
static void course_tail(struct course *course, struct engine *copy)
{
    const double outside = course->outside.integral;
    *copy = *course->engine;
    course->engine = copy;
    if (course->open && course->count > 0) {
        const struct period *last = &course->periods[course->count - 1];
        const double end_ms = course->opened_ms + (last->end_ms - last->start_ms);
        if (end_ms <= course->hold_to_ms + SAME_MS) {
            course_advance(course, end_ms);
            course_close(course);
        }
    }
    course_advance(course, course->hold_to_ms);
    course->outside.integral = outside;
}

static double mean_of(const struct period *periods, size_t count)
{
    double integral = 0, time = 0;
    for (size_t i = 0; i < count; i++) {
        integral += periods[i].integral;
        time += periods[i].end_ms - periods[i].start_ms;
    }
    return integral / time;
}

/* First and last quarter of the whole periods between the hold's first and last pulse. last_hold_ms: start of
 * its last period. */
static void measure_quarters(const struct course *course, double tone_n, struct hold_measures *measures)
{
    size_t first = 0, end = 0;
    for (size_t i = 0; i < course->count; i++) {
        const struct period *period = &course->periods[i];
        if (period->start_ms < course->hold_from_ms - SAME_MS) first = i + 1;
        if (period->end_ms < course->hold_to_ms - SAME_MS) end = i + 1;
    }
    if (end <= first) return;
    const size_t n = end - first, quarter = n / 4 > 1 ? n / 4 : 1;
    measures->first_quarter_n = mean_of(&course->periods[first], quarter) + tone_n;
    measures->last_quarter_n = mean_of(&course->periods[end - quarter], quarter) + tone_n;
    measures->droop_percent =
        100 * fabs(measures->last_quarter_n - measures->first_quarter_n) / fabs(measures->mean_n);
}

static void measure_periods(const struct course *course, const struct hold_window *window, double start_ms,
                            double tone_n, struct hold_measures *measures)
{
    const double tolerance_n = window->tolerance_percent / 100 * fabs(measures->mean_n);
    double ripple_n = (double)NAN, greatest_mean = (double)NAN;
    for (size_t i = 0; i < course->count; i++) {
        const struct period *period = &course->periods[i];
        if (period->end_ms > course->hold_to_ms + SAME_MS) break;
        const double mean_n = mean_of(period, 1) + tone_n;
        if (!(mean_n <= greatest_mean)) greatest_mean = mean_n;
        if (fabs(mean_n - measures->mean_n) > tolerance_n)
            measures->rise_ms = (double)NAN;
        else if (isnan(measures->rise_ms))
            measures->rise_ms = period->start_ms - start_ms;
        if (period->start_ms < course->hold_from_ms - SAME_MS) continue;
        measures->periods++;
        if (!(period->greatest - period->least <= ripple_n)) ripple_n = period->greatest - period->least;
    }
    measures->ripple_percent = 100 * ripple_n / fabs(measures->mean_n);
    measures->overshoot_percent = 100 * (greatest_mean / window->target_n - 1);
}

static enum status check_pulses(const struct predictor *predictor, double start_ms,
                                const struct train_pulse *pulses, size_t count, struct message *why)
{
    if (count == 0) return status_fail(why, STATUS_REFUSED, "a contraction has no pulse");
    if (!(start_ms + pulses[0].time_ms >= predictor->engine.time_ms))
        return status_fail(why, STATUS_REFUSED, "a contraction starts at %.9g ms, before the present %.9g ms",
                           start_ms + pulses[0].time_ms, predictor->engine.time_ms);
    for (size_t i = 0; i < count; i++) {
        const enum status status = recruitment_takes_current(&predictor->engine.muscle.parameters.recruitment,
                                                             pulses[i].current_ma, why);
        if (status != STATUS_OK) return status;
        if (i > 0 && !(pulses[i].time_ms - pulses[i - 1].time_ms >= 0.001 - 1e-9))
            return status_fail(why, STATUS_REFUSED,
                               "pulse %zu is %g ms after the one before, it must be at least 0.001 ms", i + 1,
                               pulses[i].time_ms - pulses[i - 1].time_ms);
    }
    return STATUS_OK;
}

enum status predictor_contraction(struct predictor *predictor, double start_ms,
                                  const struct train_pulse *pulses, size_t count, bool grid_pairs,
                                  unsigned opening, const struct hold_window *window,
                                  struct hold_measures *measures, struct message *why)
{
    const enum status status = check_pulses(predictor, start_ms, pulses, count, why);
    if (status != STATUS_OK) return status;
    struct engine copy;
    struct course course = {.engine = &predictor->engine,
                            .hold_from_ms = start_ms + window->ramp_up_ms,
                            .hold_to_ms = start_ms + window->ramp_up_ms + window->hold_ms,
                            .hold = gather_empty(),
                            .outside = gather_empty(),
                            .period = gather_empty()};
    course.periods = malloc((count + 1) * sizeof *course.periods);
    if (!course.periods) return status_fail(why, STATUS_INTERNAL, "out of memory");

    const size_t each = grid_pairs ? 2 : 1, first = opening < each ? each : opening;
    engine_advance(&predictor->engine, start_ms + pulses[0].time_ms);
    for (size_t i = 0, next = 0; i < count; i++) {
        course_advance(&course, start_ms + pulses[i].time_ms);
        if (i == next) {
            course_open(&course);
            next += i == 0 ? first : each;
        }
        predictor_pulse(predictor, pulses[i].duration_us, pulses[i].current_ma);
    }
    course_tail(&course, &copy);

    const double tone_n = predictor->engine.muscle.parameters.tone_n, none = (double)NAN;
    *measures = (struct hold_measures){
        .first_quarter_n = none, .last_quarter_n = none, .droop_percent = none, .rise_ms = none};
    measures->mean_n = course.hold.integral / window->hold_ms + tone_n;
    measures->peak_n = course.hold.greatest + tone_n;
    measures->greatest_n = fmax(course.hold.greatest, course.outside.greatest) + tone_n;
    measures->force_time_integral_outside_n_s = course.outside.integral / 1000;
    measure_quarters(&course, tone_n, measures);
    measure_periods(&course, window, start_ms, tone_n, measures);
    free(course.periods);
    return STATUS_OK;
}
