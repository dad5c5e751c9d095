/* A trace: force, capacity, potentiation and remaining force at sample times, and what a person reads off it.
 * The goal of this code: one pass over pulses and samples in order of time; what is read between samples
 * comes from the same pass. The engine runs on the muscle's own time; force is shown delay_ms later, with
 * tone. */
#include "core/predict/periods.h"
#include "core/predict/predict.h"
#include "core/predict/predictor.h"

#include "core/muscle/recruitment.h"

#include <math.h>
#include <stdlib.h>
#include <string.h>

enum { SAMPLES_MAX = 100000000 };
/* A pulse within this of the one before may be of its period, where the gaps after are at least twice as long
 * (doublets, triplets). */
#define SAME_PERIOD_MS 10.0
/* How long after the last pulse half relaxation is looked for. */
#define RELAXATION_MS_MAX 60000.0

/* The pass. */
struct pass {
    struct engine engine, after_last; /* after_last: as it was just after the last pulse */
    const struct train_pulse *pulses;
    size_t count;
    bool *same_period;
    double until_ms, step_ms, delay_ms, tone_n;
    double window_from_ms, window_to_ms;
    struct gather whole, window, period;
    double period_start_ms, ripple_n;         /* start NAN: no period is open */
    double period_length_ms;                  /* of the last whole one; NAN: none yet */
    size_t last_given;                        /* index + 1 of the last pulse given */
    double last_duration_us, last_current_ma; /* settings of the window's last pulse */
    double window_potentiation;
};

void trace_free(struct trace *trace)
{
    free(trace->time_ms);
    memset(trace, 0, sizeof *trace);
}

/* One allocation for all columns; trace->time_ms owns it. */
static enum status trace_make(struct trace *trace, size_t samples, struct message *why)
{
    memset(trace, 0, sizeof *trace);
    double *block = malloc(samples * 7 * sizeof *block);
    if (!block) return status_fail(why, STATUS_INTERNAL, "out of memory for %zu samples", samples);
    trace->samples = samples;
    trace->time_ms = block;
    trace->force_n = block + samples;
    trace->capacity = block + 2 * samples;
    trace->potentiation = block + 3 * samples;
    trace->force_remaining_20 = block + 4 * samples;
    trace->force_remaining_50 = block + 5 * samples;
    trace->activation = block + 6 * samples;
    return STATUS_OK;
}

static enum status check_pulses(const struct muscle_parameters *parameters, const struct train_pulse *pulses,
                                size_t count, struct message *why)
{
    for (size_t i = 0; i < count; i++) {
        const struct train_pulse *pulse = &pulses[i];
        if (!isfinite(pulse->time_ms) || pulse->time_ms < 0)
            return status_fail(why, STATUS_REFUSED, "pulse %zu is at %g ms, it may be at 0 or later", i + 1,
                               pulse->time_ms);
        if (!isfinite(pulse->duration_us) || pulse->duration_us < 0 || !isfinite(pulse->current_ma) ||
            pulse->current_ma < 0)
            return status_fail(why, STATUS_REFUSED, "pulse %zu has %g us and %g mA, neither may be below 0",
                               i + 1, pulse->duration_us, pulse->current_ma);
        if (i > 0 && !(pulse->time_ms - pulses[i - 1].time_ms >= 0.001 - 1e-9))
            return status_fail(why, STATUS_REFUSED,
                               "pulse %zu at %.9g ms follows one at %.9g ms: less than 0.001 ms apart", i + 1,
                               pulse->time_ms, pulses[i - 1].time_ms);
        const enum status status =
            recruitment_takes_current(&parameters->recruitment, pulse->current_ma, why);
        if (status != STATUS_OK) return status;
    }
    return STATUS_OK;
}

/* Pulses that belong to the period of the one before, told from the gaps. */
static void tell_periods(const struct train_pulse *pulses, size_t count, bool *same)
{
    for (size_t i = 0; i < count; i++) {
        same[i] = false;
        if (i == 0) continue;
        const double before = pulses[i].time_ms - pulses[i - 1].time_ms;
        double after = 0;
        for (size_t j = i + 1; j < count && j <= i + 2; j++)
            after = fmax(after, pulses[j].time_ms - pulses[j - 1].time_ms);
        if (i + 1 == count && i >= 2) after = pulses[i - 1].time_ms - pulses[i - 2].time_ms;
        same[i] = before <= SAME_PERIOD_MS && before < 0.5 * after;
    }
}

/* A period ends now (at a pulse, or where the window ends) and counts where it lies whole in the window. */
static void period_end(struct pass *pass)
{
    const double now = pass->engine.time_ms;
    if (now > pass->period_start_ms) pass->period_length_ms = now - pass->period_start_ms;
    if (pass->period_start_ms >= pass->window_from_ms - 1e-9 && now <= pass->window_to_ms + 1e-9 &&
        now > pass->period_start_ms) {
        const double range = pass->period.greatest - pass->period.least;
        if (!(range <= pass->ripple_n)) pass->ripple_n = range;
    }
    pass->period_start_ms = (double)NAN;
}

/* The window ends here. A period as long as the one before that ends here too is whole, though no pulse
 * follows it. */
static void window_end(struct pass *pass)
{
    pass->window_potentiation = muscle_potentiation(&pass->engine.state);
    const double end_ms = pass->period_start_ms + pass->period_length_ms;
    if (fabs(end_ms - pass->window_to_ms) < 1e-6) period_end(pass);
}

/* Advances, gathering; never across a corner of the window. Force after until - delay is not shown and not
 * gathered. */
static void pass_advance(struct pass *pass, double to_ms)
{
    while (pass->engine.time_ms < to_ms) {
        const double now = pass->engine.time_ms;
        const double corner[] = {pass->window_from_ms, pass->window_to_ms, pass->until_ms - pass->delay_ms};
        double end = to_ms;
        for (int i = 0; i < 3; i++)
            if (now < corner[i] && corner[i] < end) end = corner[i];
        struct gather piece = gather_empty();
        gather_advance(&piece, &pass->engine, end);
        if (now < corner[2]) gather_add(&pass->whole, &piece);
        if (now >= corner[0] && now < corner[1]) gather_add(&pass->window, &piece);
        gather_add(&pass->period, &piece);
        if (now < corner[1] && end >= corner[1]) window_end(pass);
    }
}

static void pass_pulse(struct pass *pass, size_t i)
{
    const struct train_pulse *pulse = &pass->pulses[i];
    pass_advance(pass, pulse->time_ms);
    if (!pass->same_period[i]) {
        period_end(pass);
        pass->period = gather_empty();
        pass->period_start_ms = pass->engine.time_ms;
    }
    engine_pulse(&pass->engine, recruitment_of(&pass->engine.muscle.parameters.recruitment,
                                               pulse->duration_us, pulse->current_ma));
    pass->last_given = i + 1;
    if (pulse->time_ms <= pass->window_to_ms || i == 0) {
        pass->last_duration_us = pulse->duration_us;
        pass->last_current_ma = pulse->current_ma;
    }
    if (i + 1 == pass->count) pass->after_last = pass->engine;
}

/* Pulses, samples of state at t and samples of force at t - delay, in order of time. */
static void pass_run(struct pass *pass, struct trace *trace)
{
    size_t pulse = 0, state = 0, force = 0;
    while (state < trace->samples || force < trace->samples) {
        const double state_ms = state < trace->samples ? (double)state * pass->step_ms : (double)INFINITY;
        const double force_ms =
            force < trace->samples ? (double)force * pass->step_ms - pass->delay_ms : (double)INFINITY;
        const double sample_ms = fmin(state_ms, force_ms);
        if (pulse < pass->count && pass->pulses[pulse].time_ms <= sample_ms) {
            pass_pulse(pass, pulse++);
            continue;
        }
        if (sample_ms > 0) pass_advance(pass, sample_ms);
        if (force_ms <= state_ms) {
            trace->force_n[force++] = (force_ms < 0 ? 0 : engine_force_n(&pass->engine)) + pass->tone_n;
            continue;
        }
        trace->time_ms[state] = state_ms;
        trace->capacity[state] = muscle_capacity(&pass->engine.muscle, &pass->engine.state);
        trace->potentiation[state] = muscle_potentiation(&pass->engine.state);
        trace->activation[state] = muscle_activation(&pass->engine.muscle, &pass->engine.state);
        trace->force_remaining_20[state] =
            muscle_force_remaining(&pass->engine.muscle, &pass->engine.state, 20);
        trace->force_remaining_50[state] =
            muscle_force_remaining(&pass->engine.muscle, &pass->engine.state, 50);
        state++;
    }
    /* a window may end after the last sample */
    while (pulse < pass->count && pass->pulses[pulse].time_ms <= pass->window_to_ms)
        pass_pulse(pass, pulse++);
    pass_advance(pass, pass->window_to_ms);
}

/* From the later of peak and last pulse to half the force there. peak_ms on the muscle's time. */
static double half_relaxation(struct pass *pass, double peak_ms)
{
    if (pass->count == 0) return (double)NAN;
    if (pass->last_given < pass->count) return (double)NAN; /* the trace ends before the last pulse */
    struct engine *engine = &pass->after_last;
    const double from_ms = fmax(peak_ms, engine->time_ms);
    engine_advance(engine, from_ms);
    const double half_n = 0.5 * engine_force_n(engine);
    if (!(half_n > 0)) return (double)NAN;
    while (engine->time_ms < from_ms + RELAXATION_MS_MAX) {
        const double f0 = engine_force_n(engine), d0 = engine_force_slope(engine), at_ms = engine->time_ms;
        engine_step(engine, from_ms + RELAXATION_MS_MAX);
        const double f1 = engine_force_n(engine), d1 = engine_force_slope(engine),
                     h = engine->time_ms - at_ms;
        if (f1 > half_n) continue;
        double low = 0, high = 1; /* of the cubic through both ends */
        for (int i = 0; i < 60; i++) {
            const double s = 0.5 * (low + high), rise = (f1 - f0) / h;
            const double force = f0 + h * s * (d0 + s * (3 * rise - 2 * d0 - d1 + s * (d0 + d1 - 2 * rise)));
            if (force > half_n)
                low = s;
            else
                high = s;
        }
        return at_ms + high * h - from_ms;
    }
    return (double)NAN;
}

/* Peak of one pulse of the window's last settings on the rested muscle at the potentiation in use. */
static double twitch_peak_n(const struct pass *pass, struct engine *twitch, bool exact)
{
    const struct muscle *muscle = &pass->engine.muscle;
    engine_init(twitch, muscle, exact, NULL);
    if (muscle->parameters.has_potentiation)
        for (unsigned i = 0; i < LANES_MAX; i++) twitch->state.P[i] = pass->window_potentiation;
    engine_pulse(twitch, recruitment_of(&muscle->parameters.recruitment, pass->last_duration_us,
                                        pass->last_current_ma));
    struct gather gather = gather_empty();
    const double slowest_ms =
        6 * muscle->parameters.tau1_rest_ms + muscle->parameters.tau2_ms + 20 * muscle->parameters.tau_c_ms;
    gather_advance(&gather, twitch, 3 * slowest_ms);
    return gather.greatest;
}

static void summarise(struct pass *pass, const struct trace *trace, bool exact, struct trace_summary *summary)
{
    const size_t last = trace->samples - 1;
    const double width_ms = pass->window_to_ms - pass->window_from_ms, none = (double)NAN;
    const double peak_ms = pass->whole.greatest_at_ms, last_ms = (double)last * pass->step_ms;
    summary->peak_n = isfinite(pass->whole.greatest) ? pass->whole.greatest + pass->tone_n : pass->tone_n;
    summary->time_to_peak_ms = pass->count ? peak_ms + pass->delay_ms - pass->pulses[0].time_ms : none;
    summary->half_relaxation_ms = half_relaxation(pass, peak_ms);
    summary->mean_n = width_ms > 0 ? pass->window.integral / width_ms + pass->tone_n : none;
    summary->ripple_percent = 100 * pass->ripple_n / fabs(summary->mean_n);
    summary->fusion_index = none;
    if (pass->count && isfinite(pass->ripple_n)) {
        struct engine twitch;
        summary->fusion_index = 1 - pass->ripple_n / twitch_peak_n(pass, &twitch, exact);
    }
    summary->force_time_integral_n_s = (pass->whole.integral + pass->tone_n * last_ms) / 1000;
    summary->capacity_end = trace->capacity[last];
    summary->potentiation_end = trace->potentiation[last];
    summary->force_remaining_20_end = trace->force_remaining_20[last];
    summary->force_remaining_50_end = trace->force_remaining_50[last];
    summary->window_ms[0] = pass->window_from_ms;
    summary->window_ms[1] = pass->window_to_ms;
}

static enum status pass_init(struct pass *pass, const struct muscle *muscle, const struct train_pulse *pulses,
                             size_t count, const struct motion *motion, const struct trace_options *options,
                             struct message *why)
{
    memset(pass, 0, sizeof *pass);
    engine_init(&pass->engine, muscle, options->exact, motion);
    pass->pulses = pulses;
    pass->count = count;
    pass->delay_ms = muscle->parameters.delay_ms;
    pass->tone_n = muscle->parameters.tone_n;
    const double first_ms = count ? pulses[0].time_ms : 0, last_ms = count ? pulses[count - 1].time_ms : 0;
    pass->step_ms = options->step_ms > 0 ? options->step_ms : 1;
    pass->until_ms = isnan(options->until_ms) ? last_ms + 1000 : options->until_ms;
    const bool windowed = !isnan(options->window_from_ms) && !isnan(options->window_to_ms);
    pass->window_from_ms = windowed ? options->window_from_ms : first_ms + 0.5 * (last_ms - first_ms);
    pass->window_to_ms = windowed ? options->window_to_ms : last_ms;
    pass->whole = pass->window = pass->period = gather_empty();
    pass->period_start_ms = pass->ripple_n = pass->period_length_ms = (double)NAN;
    pass->window_potentiation = muscle_potentiation(&pass->engine.state);
    if (!(pass->until_ms >= 0) || !isfinite(pass->until_ms) ||
        !(pass->until_ms / pass->step_ms < SAMPLES_MAX))
        return status_fail(why, STATUS_REFUSED,
                           "a trace until %g ms each %g ms is not possible: at most %d samples",
                           pass->until_ms, pass->step_ms, (int)SAMPLES_MAX);
    if (windowed && !(pass->window_to_ms > pass->window_from_ms))
        return status_fail(why, STATUS_REFUSED, "the window %g to %g ms is empty", pass->window_from_ms,
                           pass->window_to_ms);
    pass->same_period = malloc((count + 1) * sizeof *pass->same_period);
    if (!pass->same_period) return status_fail(why, STATUS_INTERNAL, "out of memory");
    if (options->same_period)
        memcpy(pass->same_period, options->same_period, count * sizeof *pass->same_period);
    else
        tell_periods(pulses, count, pass->same_period);
    return STATUS_OK;
}

enum status predict_trace(const struct muscle_parameters *parameters, const struct train_pulse *pulses,
                          size_t count, const struct motion *motion, const struct trace_options *options,
                          struct trace *trace, struct trace_summary *summary, struct message *why)
{
    struct pass pass;
    memset(trace, 0, sizeof *trace);
    /* a predictor checks parameters and motion, and holds the muscle */
    struct predictor *predictor = predictor_new(parameters, options->exact, motion, why);
    if (!predictor) return STATUS_REFUSED;
    enum status status = check_pulses(parameters, pulses, count, why);
    if (status == STATUS_OK)
        status = pass_init(&pass, &predictor->engine.muscle, pulses, count, motion, options, why);
    predictor_free(predictor);
    if (status != STATUS_OK) return status;
    status = trace_make(trace, (size_t)(pass.until_ms / pass.step_ms * (1 + 1e-12)) + 1, why);
    if (status == STATUS_OK) {
        pass_run(&pass, trace);
        if (!isfinite(engine_force_n(&pass.engine)))
            status = status_fail(why, STATUS_REFUSED,
                                 "force left the range of numbers: the parameters are too extreme");
        trace->bound_A = pass.engine.state.bound_A;
        trace->bound_tau1 = pass.engine.state.bound_tau1;
        if (summary && status == STATUS_OK) summarise(&pass, trace, options->exact, summary);
    }
    free(pass.same_period);
    if (status != STATUS_OK) trace_free(trace);
    return status;
}
