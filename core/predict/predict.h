/* Predict: pulses -> force. A predictor is one muscle's state between pulses; a trace is force at sample times; measures are
 * what a person reads off a hold. Method: C and S in closed form, force and fatigue integrated between pulses with a step chosen from the parameters. */
#ifndef PULSEWRIGHT_CORE_PREDICT_PREDICT_H
#define PULSEWRIGHT_CORE_PREDICT_PREDICT_H
#include "core/muscle/parameters.h"
#include "core/status/status.h"
#include "core/train/contraction.h"
#include <stdbool.h>
#include <stddef.h>

/* A moving muscle: relative length and velocity at sample times (2 rows or more, times ascending). */
struct motion {
    size_t samples;
    double *time_ms, *relative_length, *relative_velocity;
    bool periodic; /* its last row equals its first */
};

struct predictor; /* opaque; one allocation, no pointers inside: predictor_copy is a memcpy */

/* Creates a rested muscle (dormant where it potentiates). `exact` chooses the 1e-7 / 1e-8 engine. `motion` may be NULL, else outlives it.
 * NULL with `why` filled where parameters are not usable. Free with predictor_free. */
struct predictor *predictor_new(const struct muscle_parameters *parameters, bool exact, const struct motion *motion, struct message *why);
void predictor_free(struct predictor *predictor);
size_t predictor_size(void);
void predictor_copy(struct predictor *to, const struct predictor *from); /* to: any predictor of predictor_new */
double predictor_time_ms(const struct predictor *predictor);
/* Moves on to time_ms (not before the present time). */
void predictor_advance(struct predictor *predictor, double time_ms);
/* Gives one pulse at the present time. */
void predictor_pulse(struct predictor *predictor, double duration_us, double current_ma);
/* Now: force without delay, tone included. */
double predictor_force_n(const struct predictor *predictor);
double predictor_capacity(const struct predictor *predictor);
double predictor_potentiation(const struct predictor *predictor);
double predictor_activation(const struct predictor *predictor); /* share- and drive-weighted mean of x_k, 0..1 */
double predictor_force_remaining(const struct predictor *predictor, double frequency_pps);

/* Measures of one contraction's hold, from F(t + delay) so that they line up with the pulses. */
struct hold_measures {
    double mean_n, peak_n, first_quarter_n, last_quarter_n; /* tone included; the quarters NAN without a whole period */
    /* ripple and droop NAN without a whole period; droop is a magnitude (the quarters have the sign); overshoot NAN where the target is */
    double ripple_percent, droop_percent, overshoot_percent;
    double rise_ms;                                           /* NAN where the hold never settles */
    double force_time_integral_outside_n_s;                   /* ramps: outside the hold, first to last pulse, tone aside */
    double greatest_n; /* over the whole contraction, ramps too: what a force cap is held against */
    unsigned periods;                                         /* whole periods in the hold */
};
struct hold_window {
    double ramp_up_ms, hold_ms; /* from the contraction's first pulse given: less contraction_skipped_ms where ramps begin too weak */
    double target_n, tolerance_percent;
};
/* Gives the contraction's pulses to the predictor (times from start_ms, which is at or after the present time), measures its
 * hold, and leaves the predictor at the last pulse. `grid_pairs`: a pair counts as one period; `opening`: its pulses as one. */
enum status predictor_contraction(struct predictor *predictor, double start_ms, const struct train_pulse *pulses, size_t count,
                                  bool grid_pairs, unsigned opening, const struct hold_window *window,
                                  struct hold_measures *measures, struct message *why);

struct trace_options {
    bool exact;
    double step_ms;  /* 1 */
    double until_ms; /* NAN: last pulse + 1000 */
    double window_from_ms, window_to_ms; /* on the pulses' time; NAN: the second half from first to last pulse */
    const bool *same_period; /* a pulse: it belongs to the period of the pulse before (openings, pairs). NULL: told from the gaps */
};
struct trace {
    size_t samples;
    double *time_ms, *force_n, *capacity, *potentiation, *force_remaining_20, *force_remaining_50, *activation;
    bool bound_A, bound_tau1; /* a state stopped at its bound: warn */
};
/* Peak and integral are those of the force as a recording shows it, between samples too; time to peak runs from the first pulse;
 * mean and ripple are of the window; NAN where there is nothing to measure. */
struct trace_summary {
    double peak_n, time_to_peak_ms, half_relaxation_ms, mean_n, ripple_percent, fusion_index, force_time_integral_n_s;
    double capacity_end, potentiation_end, force_remaining_20_end, force_remaining_50_end, window_ms[2];
};
/* One trace and its summary. Pulses ascending, at least 1 us apart. Free with trace_free. `summary` may be NULL. */
enum status predict_trace(const struct muscle_parameters *parameters, const struct train_pulse *pulses, size_t count,
                          const struct motion *motion, const struct trace_options *options, struct trace *trace,
                          struct trace_summary *summary, struct message *why);
void trace_free(struct trace *trace);

#endif
