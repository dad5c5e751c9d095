/* Attempt: one contraction from given settings, compiled to pulses and run on a copy of the muscle.
 * Everything the planner learns about settings it learns here, from the same quantised pulses that the device
 * will give. */
#ifndef PULSEWRIGHT_CORE_PLAN_ATTEMPT_H
#define PULSEWRIGHT_CORE_PLAN_ATTEMPT_H
#include "core/plan/settings.h"
#include "core/predict/predict.h"

/* A contraction's pulses, relative to the first pulse given. Arrays are the bench's. */
struct compiled {
    size_t segments, pulses, capacity; /* capacity: of each array */
    struct segment *segment;
    struct pulse *pulse;       /* as the device gives them */
    struct train_pulse *timed; /* as predict takes them */
    uint64_t last_us;          /* time of the last pulse given */
    double skipped_ms;         /* of the ramp, before the first pulse given */
    double ramp_up_ms;         /* from the first pulse given to the start of the hold */
};

struct attempt_result {
    struct hold_measures hold;
    uint64_t last_us;
};

/* What attempts on one channel share. One allocation each for pulses and predictor: attempt_bench_open /
 * _close. */
struct attempt_bench {
    struct settings_space space;
    struct dose_limits limits;
    uint8_t channel;
    double tolerance_percent;
    double target_n;
    struct compiled compiled;
    struct predictor *after; /* the state at the last pulse of the last attempt */
    unsigned long attempts;
};

/* pulses_max: the most pulses one contraction can have. */
enum status attempt_bench_open(struct attempt_bench *bench, const struct muscle_parameters *parameters,
                               size_t pulses_max, bool exact, struct message *why);
void attempt_bench_close(struct attempt_bench *bench);
/* The most pulses a contraction of this length can have at this rate. */
size_t attempt_pulses_max(double contraction_ms, double frequency_pps);
/* Compiles ramps (unless they stand already) and pulses into bench->compiled. */
enum status attempt_compile(struct attempt_bench *bench, struct contraction *contraction, bool keep_pieces,
                            struct message *why);
/* Runs what is compiled from `before` at start_ms; bench->after then stands at the last pulse. */
enum status attempt_run(struct attempt_bench *bench, const struct contraction *contraction,
                        const struct predictor *before, double start_ms, struct attempt_result *result,
                        struct message *why);
/* Plays what is compiled through the guard at start_us. The first figure broken, or DOSE_NONE; `guard` is
 * moved on. */
struct dose_verdict attempt_guard(const struct attempt_bench *bench, uint64_t start_us,
                                  struct dose_channel *guard);

/* What a contraction is held against. margin: share of each bound kept free (0 in a recount). */
struct contraction_aim {
    double target_n, tolerance_percent, ripple_percent_max, droop_percent_max, rise_ms_max,
        overshoot_percent_max;
    double force_cap_n; /* NAN: none */
};
struct contraction_aim contraction_aim_of(const struct demand *demand, double target_n, double force_cap_n);
/* WHY_NONE where every demand is met; else the first that is not, with its two numbers. */
struct plan_why contraction_miss(const struct contraction_aim *aim, const struct hold_measures *hold,
                                 double margin);

#endif
