/* One contraction tried on a copy of the muscle. The goal of this code: the search sees exactly the quantised
 * pulses that are given, and one function says whether a contraction is met, for search and recount alike. */
#include "core/plan/attempt.h"

#include <math.h>
#include <stdlib.h>

size_t attempt_pulses_max(double contraction_ms, double frequency_pps)
{
    /* pairs double the count; openings and grid ends add a few */
    return 2 * (size_t)ceil(contraction_ms / 1000.0 * frequency_pps) + 16;
}

enum status attempt_bench_open(struct attempt_bench *bench, const struct muscle_parameters *parameters,
                               size_t pulses_max, bool exact, struct message *why)
{
    if (pulses_max < CONTRACTION_SEGMENTS_MAX) pulses_max = CONTRACTION_SEGMENTS_MAX;
    bench->compiled.capacity = pulses_max; /* a segment has a pulse at least */
    bench->compiled.segment = calloc(pulses_max, sizeof *bench->compiled.segment);
    bench->compiled.pulse = calloc(pulses_max, sizeof *bench->compiled.pulse);
    bench->compiled.timed = calloc(pulses_max, sizeof *bench->compiled.timed);
    bench->after = predictor_new(parameters, exact, NULL, why);
    if (bench->compiled.segment && bench->compiled.pulse && bench->compiled.timed && bench->after)
        return STATUS_OK;
    const bool refused = bench->after == NULL;
    attempt_bench_close(bench);
    return refused ? STATUS_REFUSED : status_fail(why, STATUS_INTERNAL, "out of memory");
}

void attempt_bench_close(struct attempt_bench *bench)
{
    free(bench->compiled.segment);
    free(bench->compiled.pulse);
    free(bench->compiled.timed);
    predictor_free(bench->after);
    bench->compiled.segment = NULL;
    bench->compiled.pulse = NULL;
    bench->compiled.timed = NULL;
    bench->after = NULL;
}

static enum status expand(struct attempt_bench *bench, struct message *why)
{
    struct compiled *compiled = &bench->compiled;
    compiled->pulses = 0;
    for (size_t s = 0; s < compiled->segments; s++) {
        struct segment_cursor cursor;
        segment_begin(&cursor, &compiled->segment[s], &bench->space.grid);
        struct pulse pulse;
        while (segment_next(&cursor, &pulse)) {
            if (compiled->pulses == compiled->capacity)
                return status_fail(why, STATUS_INTERNAL, "a contraction has more than %zu pulses",
                                   compiled->capacity);
            compiled->timed[compiled->pulses] = (struct train_pulse){
                (double)pulse.at_us / 1000.0, (double)pulse.duration_us, (double)pulse.current_ua / 1000.0};
            compiled->pulse[compiled->pulses++] = pulse;
        }
    }
    return STATUS_OK;
}

enum status attempt_compile(struct attempt_bench *bench, struct contraction *contraction, bool keep_pieces,
                            struct message *why)
{
    struct compiled *compiled = &bench->compiled;
    enum status status = STATUS_OK;
    if (!keep_pieces && contraction->gaps == 0)
        status = contraction_compile_ramps(contraction, &bench->space.recruitment, &bench->space.grid, why);
    if (status == STATUS_OK)
        status = contraction_segments(contraction, &bench->space.grid, 0, bench->channel, compiled->segment,
                                      compiled->capacity, &compiled->segments, &compiled->last_us, why);
    if (status != STATUS_OK) return status;
    status = expand(bench, why);
    if (status != STATUS_OK) return status;
    /* leading pulses below the stimulator's range are not given: the hold comes sooner after the first that
     * is */
    compiled->skipped_ms = contraction_skipped_ms(contraction, &bench->space.grid);
    compiled->ramp_up_ms = fmax(contraction->ramp_up.ms - compiled->skipped_ms, 0.0);
    return STATUS_OK;
}

enum status attempt_run(struct attempt_bench *bench, const struct contraction *contraction,
                        const struct predictor *before, double start_ms, struct attempt_result *result,
                        struct message *why)
{
    const struct compiled *compiled = &bench->compiled;
    const bool free_gaps =
        contraction->gaps > 0; /* they have no hold: all from first to last pulse is measured */
    const struct hold_window window = {.ramp_up_ms = free_gaps ? 0.0 : compiled->ramp_up_ms,
                                       .hold_ms = free_gaps ? (double)compiled->last_us / 1000.0
                                                            : contraction->hold_ms,
                                       .target_n = bench->target_n,
                                       .tolerance_percent = bench->tolerance_percent};
    bench->attempts++;
    predictor_copy(bench->after, before);
    result->last_us = compiled->last_us;
    return predictor_contraction(
        bench->after, start_ms, compiled->timed, compiled->pulses, contraction->pairs,
        compiled->skipped_ms > 0.0 ? 1 : contraction->opening, /* an opening that is not given is none */
        &window, &result->hold, why);
}

struct dose_verdict attempt_guard(const struct attempt_bench *bench, uint64_t start_us,
                                  struct dose_channel *guard)
{
    for (size_t i = 0; i < bench->compiled.pulses; i++) {
        struct pulse pulse = bench->compiled.pulse[i];
        pulse.at_us += start_us;
        const struct dose_verdict verdict = dose_check(&bench->limits, guard, &pulse);
        if (verdict.figure != DOSE_NONE) return verdict;
        dose_given(guard, &pulse);
    }
    return (struct dose_verdict){.figure = DOSE_NONE};
}

struct contraction_aim contraction_aim_of(const struct demand *demand, double target_n, double force_cap_n)
{
    return (struct contraction_aim){.target_n = target_n,
                                    .tolerance_percent = demand->tolerance_percent,
                                    .ripple_percent_max = demand->ripple_percent_max,
                                    .droop_percent_max = demand->droop_percent_max,
                                    .rise_ms_max = demand->rise_ms_max,
                                    .overshoot_percent_max = demand->overshoot_percent_max,
                                    .force_cap_n = force_cap_n};
}

struct plan_why contraction_miss(const struct contraction_aim *aim, const struct hold_measures *hold,
                                 double margin)
{
    const double keep = 1.0 - margin;
    const double low = aim->target_n * (1.0 - keep * aim->tolerance_percent / 100.0);
    const double high = aim->target_n * (1.0 + keep * aim->tolerance_percent / 100.0);
    if (hold->greatest_n > keep * aim->force_cap_n)
        return plan_why_make(WHY_FORCE_CAP, hold->greatest_n, aim->force_cap_n, "N");
    if (!(hold->mean_n >= low)) return plan_why_make(WHY_RECRUITMENT_SPENT, hold->mean_n, low, "N");
    if (hold->mean_n > high) return plan_why_make(WHY_OVERSHOOT, hold->mean_n, high, "N");
    if (!(hold->ripple_percent <= keep * aim->ripple_percent_max))
        return plan_why_make(WHY_RIPPLE, hold->ripple_percent, aim->ripple_percent_max, "%");
    if (!(fabs(hold->droop_percent) <= keep * aim->droop_percent_max))
        return plan_why_make(WHY_DROOP, fabs(hold->droop_percent), aim->droop_percent_max, "%");
    if (!(hold->rise_ms <= keep * aim->rise_ms_max))
        return plan_why_make(WHY_RISE, hold->rise_ms, aim->rise_ms_max, "ms");
    if (!(hold->overshoot_percent <= keep * aim->overshoot_percent_max))
        return plan_why_make(WHY_OVERSHOOT, hold->overshoot_percent, aim->overshoot_percent_max, "%");
    return plan_why_make(WHY_NONE, 0.0, 0.0, "");
}
