/* Muscle: composes recruitment, summation, potentiation, force, fatigue and length. Constants of one muscle,
 * its state at a moment, and what happens at a pulse; what happens between pulses is integrated in
 * core/predict by the derivatives of lanes.h.
 *
 * State lies in lanes: tiers with the same history are one lane (where tiers are alike), else each tier has
 * its own. */
#ifndef PULSEWRIGHT_CORE_MUSCLE_MUSCLE_H
#define PULSEWRIGHT_CORE_MUSCLE_MUSCLE_H
#include "core/muscle/parameters.h"
#include "core/muscle/pool.h"
#include "core/status/status.h"
#include <stdbool.h>

enum { LANE_WIDTH = 8, LANES_MAX = MUSCLE_TIERS_MAX, LANE_VECTORS_MAX = LANES_MAX / LANE_WIDTH };
#define LANE_ALIGNED __attribute__((aligned(64)))

/* Long enough ago that summation has forgotten it. */
#define MUSCLE_NEVER (-1e300)

/* Constants. A lane's constants are those of its tiers. */
struct muscle {
    struct muscle_parameters parameters;
    struct pool pool;
    double length;                      /* L; a motion takes its place */
    double gain, rise_rate, decay_rate; /* potentiation; 0 where there is none */
    double fatigue_rate;                /* 1/tau_fat */
    double tau1_most_ms;                /* 5 tau1_rest */
};

/* One muscle at a moment. Plain data. Lanes beyond `lanes` rest and have share 0. */
struct muscle_state {
    LANE_ALIGNED double C[LANES_MAX], S[LANES_MAX];
    LANE_ALIGNED double phi[LANES_MAX]; /* specific force F/s, N */
    LANE_ALIGNED double A[LANES_MAX], Km[LANES_MAX], tau1[LANES_MAX], P[LANES_MAX];
    LANE_ALIGNED double w[LANES_MAX];
    LANE_ALIGNED double share[LANES_MAX];
    /* constants of the lane's tiers: */
    LANE_ALIGNED double tau_c[LANES_MAX], slower_inverse[LANES_MAX], fatigue[LANES_MAX];
    /* 0 where the state stands at its bound and may only leave it, else -infinity or infinity: */
    LANE_ALIGNED double dA_least[LANES_MAX], dtau1_most[LANES_MAX];
    LANE_ALIGNED double t_last[LANES_MAX]; /* of the last pulse that touched it, ms; MUSCLE_NEVER: none yet */
    unsigned char lane[MUSCLE_TIERS_MAX];  /* of a tier */
    unsigned lanes;
    bool bound_A, bound_tau1; /* a bound was reached at some time */
};

/* Fills `muscle`; STATUS_REFUSED where a parameter can not be used (named, with what it may hold). Owns
 * nothing. */
enum status muscle_init(struct muscle *muscle, const struct muscle_parameters *parameters,
                        struct message *why);
/* Rested; dormant where it potentiates. */
void muscle_rest(const struct muscle *muscle, struct muscle_state *state);
/* One pulse that recruits rho, at time_ms, on the state just before it, in the model's order. */
void muscle_pulse(const struct muscle *muscle, struct muscle_state *state, double rho, double time_ms);

double muscle_force_n(const struct muscle_state *state); /* sum of F_k; no tone */
double muscle_capacity(const struct muscle *muscle, const struct muscle_state *state);
double muscle_potentiation(const struct muscle_state *state);
double muscle_activation(const struct muscle *muscle, const struct muscle_state *state); /* sum s_k w_k x_k */
/* Steady fused force at full recruitment and P = 1 now, over its rested value. */
double muscle_force_remaining(const struct muscle *muscle, const struct muscle_state *state,
                              double frequency_pps);

/* L at a relative length: exp(-(l-1)^2/0.45) (Thelen 2003). */
double muscle_length_factor(double relative_length);
/* V at a relative velocity, shortening negative (Hill's relation in Thelen's 2003 form). */
double muscle_velocity_factor(double relative_velocity);
/* Km_rest, tau1_rest and tau_c at a length in mm, by the profile's slopes (unchanged where it has none). */
struct muscle_parameters muscle_at_length(const struct muscle_parameters *parameters, double length_mm);

#endif
