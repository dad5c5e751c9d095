/* The engine between pulses. The goal of this code: errors within a stated share of a trace's peak over the
 * whole range of parameters, at a few dozen nanoseconds a pulse and tier.
 *
 * Method: summation is exact (C and S in closed form, one exponential a step and lane, by polynomial). The
 * rest is integrated by the explicit pair of order 5(4) of Dormand and Prince (1980), local extrapolation,
 * all lanes by one step, the step from the error estimate. A state that reaches its bound is met there: the
 * step is taken again to the very moment. When activation and force have died away, what is left (fatigue,
 * potentiation) is exponential and one step goes to the end. */
#include "core/predict/engine.h"

#include <math.h>
#include <stdint.h>
#include <string.h>

/* Local tolerances, found against CVODE over drawn parameters (tests/core/predict): default 1e-4 of peak and
 * 1e-5 of capacity overall, exact 1e-7 and 1e-8. */
#define TOLERANCE_DEFAULT 1e-6
#define TOLERANCE_EXACT 2e-9
/* Below this share of its scale a lane's force, and what its activation may still give, is taken as gone. */
#define QUIET 1e-13
/* Within this of a bound, relative, a state stands on it. */
#define BOUND_NEAR 1e-12
/* Activation needs at least so many tau_c to get there. */
#define QUIET_WAIT 25.0
#define STEP_GROWTH_MOST 6.0
/* While activation lives a step is at most so many of the shortest tau_c: a longer one could pass over x's
 * fall without seeing it. */
#define STEP_TAU_C_MOST 4.0
/* First step after a pulse, of the time in which x changes by itself, at tolerance 1; the pair's order makes
 * it a fifth root. */
#define FIRST_SHARE 4.5

enum { STAGES = 7 };

/* Result of a tried step. */
struct trial {
    LANE_ALIGNED double y[LANE_VARIABLES][LANES_MAX];
    LANE_ALIGNED double derivative[LANE_VARIABLES][LANES_MAX];
    LANE_ALIGNED double C[LANES_MAX], S[LANES_MAX];
    double error; /* over the tolerance */
    double past;  /* above 0: a state may be beyond its bound */
};

void engine_tolerate(struct engine *engine, double tolerance)
{
    engine->tolerance = tolerance;
    engine->first_share = FIRST_SHARE * pow(tolerance, 0.2);
}

void engine_init(struct engine *engine, const struct muscle *muscle, bool exact, const struct motion *motion)
{
    memset(engine, 0, sizeof *engine);
    engine->muscle = *muscle;
    muscle_rest(&engine->muscle, &engine->state);
    engine_tolerate(engine, exact ? TOLERANCE_EXACT : TOLERANCE_DEFAULT);
    engine->motion = motion;
    engine->step_most_ms = (double)INFINITY;
    for (unsigned i = 0; i < engine->state.lanes; i++) {
        engine->quiet_wait_ms = fmax(engine->quiet_wait_ms, QUIET_WAIT * engine->state.tau_c[i]);
        engine->step_most_ms = fmin(engine->step_most_ms, STEP_TAU_C_MOST * engine->state.tau_c[i]);
    }
}

static double drive_factor(const struct engine *engine, double time_ms)
{
    return engine->motion ? motion_factor(engine->motion, time_ms) : engine->muscle.length;
}

LANES_INLINE void load_constants(struct lanes_constants *constants, const struct engine *engine, unsigned at)
{
    const struct muscle *muscle = &engine->muscle;
    const struct muscle_parameters *p = &muscle->parameters;
    const struct muscle_state *state = &engine->state;
    const lanes_t fatigue = *(const lanes_t *)&state->fatigue[at];
    constants->slower_inverse = *(const lanes_t *)&state->slower_inverse[at];
    constants->alpha_A = fatigue * p->alpha_A_per_ms2;
    constants->alpha_Km = fatigue * p->alpha_Km_per_ms_n;
    constants->alpha_tau1 = fatigue * p->alpha_tau1_per_n;
    constants->dA_least = *(const lanes_t *)&state->dA_least[at];
    constants->dtau1_most = *(const lanes_t *)&state->dtau1_most[at];
    constants->A_rest = p->A_rest_n_per_ms;
    constants->Km_rest = p->Km_rest;
    constants->tau1_rest = p->tau1_rest_ms;
    constants->tau2 = p->tau2_ms;
    constants->fatigue_rate = muscle->fatigue_rate;
    constants->gain = muscle->gain;
    constants->rise_rate = muscle->rise_rate;
    constants->decay_rate = muscle->decay_rate;
}

LANES_INLINE void load_state(lanes_t y[LANE_VARIABLES], const struct muscle_state *state, unsigned at)
{
    y[LANE_PHI] = *(const lanes_t *)&state->phi[at];
    y[LANE_A] = *(const lanes_t *)&state->A[at];
    y[LANE_KM] = *(const lanes_t *)&state->Km[at];
    y[LANE_TAU1] = *(const lanes_t *)&state->tau1[at];
    y[LANE_P] = *(const lanes_t *)&state->P[at];
}

/* Derivatives of the state as it stands. Returns the greatest rate of change of x = C/(K' + C) in a driven
 * lane, relative, per ms: C' = (S - C)/tau_c, and steps of the order of (K' + C)/C' are where a polynomial
 * stops to follow x. */
LANES_CLONES static double refresh(struct engine *engine, double factor)
{
    const struct muscle_state *state = &engine->state;
    const lanes_t zero = {0};
    const bool potentiates = engine->muscle.parameters.has_potentiation;
    lanes_t fastest = zero;
    for (unsigned at = 0; at < state->lanes; at += LANE_WIDTH) {
        struct lanes_constants constants;
        lanes_t y[LANE_VARIABLES], dy[LANE_VARIABLES] = {zero, zero, zero, zero, zero};
        load_constants(&constants, engine, at);
        load_state(y, state, at);
        const lanes_t w = *(const lanes_t *)&state->w[at], C = *(const lanes_t *)&state->C[at],
                      drive = w * factor;
        lanes_derive(dy, y, &C, &drive, &constants, potentiates);
        for (int i = 0; i < LANE_VARIABLES; i++) *(lanes_t *)&engine->derivative[i][at] = dy[i];
        const lanes_t D = y[LANE_KM] * (1 + constants.gain * (1 - y[LANE_P])) + C;
        lanes_t rate = *(const lanes_t *)&state->S[at] - C;
        lanes_magnitude(&rate, &rate);
        rate = rate / (*(const lanes_t *)&state->tau_c[at] * D);
        const lanes_mask_t driven = w > zero;
        lanes_select(&rate, &driven, &rate, &zero);
        lanes_greater(&fastest, &fastest, &rate);
    }
    return lanes_greatest(&fastest);
}

/* The pair's coefficients (Dormand and Prince 1980, RK5(4)7M); the row of the last stage is the new state. */
static const double node[STAGES] = {0, 1.0 / 5, 3.0 / 10, 4.0 / 5, 8.0 / 9, 1, 1};
static const double row_2[] = {1.0 / 5};
static const double row_3[] = {3.0 / 40, 9.0 / 40};
static const double row_4[] = {44.0 / 45, -56.0 / 15, 32.0 / 9};
static const double row_5[] = {19372.0 / 6561, -25360.0 / 2187, 64448.0 / 6561, -212.0 / 729};
static const double row_6[] = {9017.0 / 3168, -355.0 / 33, 46732.0 / 5247, 49.0 / 176, -5103.0 / 18656};
static const double row_7[] = {35.0 / 384, 0, 500.0 / 1113, 125.0 / 192, -2187.0 / 6784, 11.0 / 84};
static const double row_error[] = {71.0 / 57600,      0,          -71.0 / 16695, 71.0 / 1920,
                                   -17253.0 / 339200, 22.0 / 525, -1.0 / 40};

/* out = y + h sum of row[j] k[j] */
LANES_INLINE void combine(lanes_t out[LANE_VARIABLES], const lanes_t y[LANE_VARIABLES],
                          const lanes_t (*k)[LANE_VARIABLES], const double *row, int count, double h,
                          int variables)
{
    double by[STAGES];
    for (int j = 0; j < count; j++) by[j] = h * row[j];
    for (int i = 0; i < variables; i++) {
        lanes_t sum = y[i];
        for (int j = 0; j < count; j++) /* the newest last: it is waited for */
            if (row[j] != 0) sum += k[j][i] * by[j];
        out[i] = sum;
    }
}

/* C after h: e^{-h/tau} given. */
LANES_INLINE void activation_after(lanes_t *out, const lanes_t *C, const lanes_t *S_rate,
                                   const lanes_t *decay, double h)
{
    *out = (*C + *S_rate * h) * *decay;
}

/* One tried step of one row of lanes (written out twice: with and without potentiation); the greatest error
 * of each lane into *error, how far it is beyond a bound into *past. */
LANES_INLINE void try_row(const struct engine *engine, struct trial *trial, unsigned at, double h,
                          const double factor[STAGES], lanes_t *error, lanes_t *past, bool potentiates)
{
    const int variables = potentiates ? LANE_VARIABLES : LANE_P;
    const struct muscle_state *state = &engine->state;
    struct lanes_constants constants;
    lanes_t y[LANE_VARIABLES], z[LANE_VARIABLES], k[STAGES][LANE_VARIABLES];
    load_constants(&constants, engine, at);
    load_state(y, state, at);
    z[LANE_P] = y[LANE_P];
    for (int i = 0; i < variables; i++) k[0][i] = *(const lanes_t *)&engine->derivative[i][at];
    const lanes_t C = *(const lanes_t *)&state->C[at], S = *(const lanes_t *)&state->S[at],
                  w = *(const lanes_t *)&state->w[at];
    const lanes_t rate = 1 / *(const lanes_t *)&state->tau_c[at], S_rate = S * rate;

    /* e^{-h/10 tau}, its powers at the nodes 2/10, 3/10, 8/10 and 10/10; 8/9 on its own */
    lanes_t argument = rate * (-h / 10), e1, e89, Cs, drive;
    lanes_exp(&e1, &argument);
    argument = rate * (-h * node[4]);
    lanes_exp(&e89, &argument);
    const lanes_t e2 = e1 * e1, e3 = e2 * e1, e4 = e2 * e2, e8 = e4 * e4, e10 = e8 * e2;

    combine(z, y, k, row_2, 1, h, variables);
    activation_after(&Cs, &C, &S_rate, &e2, node[1] * h);
    drive = w * factor[1];
    lanes_derive(k[1], z, &Cs, &drive, &constants, potentiates);
    combine(z, y, k, row_3, 2, h, variables);
    activation_after(&Cs, &C, &S_rate, &e3, node[2] * h);
    drive = w * factor[2];
    lanes_derive(k[2], z, &Cs, &drive, &constants, potentiates);
    combine(z, y, k, row_4, 3, h, variables);
    activation_after(&Cs, &C, &S_rate, &e8, node[3] * h);
    drive = w * factor[3];
    lanes_derive(k[3], z, &Cs, &drive, &constants, potentiates);
    combine(z, y, k, row_5, 4, h, variables);
    activation_after(&Cs, &C, &S_rate, &e89, node[4] * h);
    drive = w * factor[4];
    lanes_derive(k[4], z, &Cs, &drive, &constants, potentiates);
    combine(z, y, k, row_6, 5, h, variables);
    activation_after(&Cs, &C, &S_rate, &e10, h);
    drive = w * factor[5];
    lanes_derive(k[5], z, &Cs, &drive, &constants, potentiates);
    combine(z, y, k, row_7, 6, h, variables);
    lanes_derive(k[6], z, &Cs, &drive, &constants, potentiates);

    *(lanes_t *)&trial->C[at] = Cs;
    *(lanes_t *)&trial->S[at] = S * e10;
    lanes_t miss[LANE_VARIABLES], size;
    combine(miss, (const lanes_t[LANE_VARIABLES]){{0}}, k, row_error, STAGES, h, variables);
    *(lanes_t *)&trial->y[LANE_P][at] = y[LANE_P];
    *(lanes_t *)&trial->derivative[LANE_P][at] = (lanes_t){0};
    for (int i = 0; i < variables; i++) {
        *(lanes_t *)&trial->y[i][at] = z[i];
        *(lanes_t *)&trial->derivative[i][at] = k[6][i];
        lanes_magnitude(&miss[i], &miss[i]);
    }
    lanes_greater(&size, (const lanes_t *)&engine->scale[at], &z[LANE_PHI]);
    size += 1e-30;
    const lanes_t inverse = 1 / size;
    const lanes_t of_phi = miss[LANE_PHI] * inverse, of_A = miss[LANE_A] * (1 / constants.A_rest),
                  of_Km = miss[LANE_KM] * (1 / constants.Km_rest),
                  of_tau1 = miss[LANE_TAU1] * (1 / constants.tau1_rest);
    const lanes_t under = z[LANE_A] * (-1 / constants.A_rest),
                  over = z[LANE_TAU1] * (1 / engine->muscle.tau1_most_ms) - 1;
    lanes_greater(error, &of_A, &of_phi);
    lanes_greater(error, error, &of_Km);
    lanes_greater(error, error, &of_tau1);
    if (potentiates) lanes_greater(error, error, &miss[LANE_P]);
    lanes_greater(past, &under, &over);
}

/* A step of h from the state, not yet taken. */
LANES_CLONES static void try_step(const struct engine *engine, struct trial *trial, double h,
                                  const double factor[STAGES])
{
    const bool potentiates = engine->muscle.parameters.has_potentiation;
    lanes_t worst = {0}, farthest = {0}, error, past;
    farthest -= 1;
    for (unsigned at = 0; at < engine->state.lanes; at += LANE_WIDTH) {
        if (potentiates)
            try_row(engine, trial, at, h, factor, &error, &past, true);
        else
            try_row(engine, trial, at, h, factor, &error, &past, false);
        lanes_greater(&worst, &error, &worst);
        lanes_greater(&farthest, &past, &farthest);
    }
    trial->error = lanes_greatest(&worst) / engine->tolerance;
    trial->past = lanes_greatest(&farthest);
}

/* Makes a tried step the state. */
LANES_CLONES static void take(struct engine *engine, const struct trial *trial)
{
    struct muscle_state *state = &engine->state;
    for (unsigned at = 0; at < state->lanes; at += LANE_WIDTH) {
        const lanes_t *phi = (const lanes_t *)&trial->y[LANE_PHI][at];
        lanes_t *scale = (lanes_t *)&engine->scale[at];
        *(lanes_t *)&state->C[at] = *(const lanes_t *)&trial->C[at];
        *(lanes_t *)&state->S[at] = *(const lanes_t *)&trial->S[at];
        *(lanes_t *)&state->phi[at] = *phi;
        *(lanes_t *)&state->A[at] = *(const lanes_t *)&trial->y[LANE_A][at];
        *(lanes_t *)&state->Km[at] = *(const lanes_t *)&trial->y[LANE_KM][at];
        *(lanes_t *)&state->tau1[at] = *(const lanes_t *)&trial->y[LANE_TAU1][at];
        *(lanes_t *)&state->P[at] = *(const lanes_t *)&trial->y[LANE_P][at];
        for (int i = 0; i < LANE_VARIABLES; i++)
            *(lanes_t *)&engine->derivative[i][at] = *(const lanes_t *)&trial->derivative[i][at];
        lanes_greater(scale, phi, scale);
    }
}

/* Signed distance of the lane that is nearest to a bound it does not stand on, or farthest beyond it (then
 * positive); relative. */
static double beyond(const struct engine *engine, const double *A, const double *tau1)
{
    const struct muscle_state *state = &engine->state;
    double worst = -1;
    for (unsigned i = 0; i < state->lanes; i++) {
        const double under = -A[i] / engine->muscle.parameters.A_rest_n_per_ms;
        const double over = tau1[i] / engine->muscle.tau1_most_ms - 1;
        if (under > worst && state->dA_least[i] < 0) worst = under;
        if (over > worst && state->dtau1_most[i] > 0) worst = over;
    }
    return worst;
}

/* Bounds, after a step: a state at (or beyond by rounding) its bound stands on it and may only leave it. */
static void settle_bounds(struct engine *engine)
{
    struct muscle_state *state = &engine->state;
    engine->standing = false;
    const double near_A = BOUND_NEAR * engine->muscle.parameters.A_rest_n_per_ms,
                 most = engine->muscle.tau1_most_ms;
    for (unsigned i = 0; i < state->lanes; i++) {
        const bool stands_A = state->A[i] <= near_A && engine->derivative[LANE_A][i] <= 0;
        const bool stands_tau1 =
            state->tau1[i] >= most * (1 - BOUND_NEAR) && engine->derivative[LANE_TAU1][i] >= 0;
        const double least = stands_A ? 0 : -(double)INFINITY, greatest = stands_tau1 ? 0 : (double)INFINITY;
        if (stands_A || state->A[i] < 0) state->A[i] = 0;
        if (stands_tau1 || state->tau1[i] > most) state->tau1[i] = most;
        state->bound_A |= stands_A;
        state->bound_tau1 |= stands_tau1;
        if (least != state->dA_least[i] || greatest != state->dtau1_most[i]) engine->fresh = false;
        state->dA_least[i] = least;
        state->dtau1_most[i] = greatest;
        engine->standing |= stands_A || stands_tau1;
    }
}

/* The longest step worth trying first after a pulse. */
static double first_step(const struct engine *engine)
{
    return engine->fastest > 0 ? engine->first_share / engine->fastest : 1;
}

/* True where force and activation have died away in every lane. */
static bool quiet(const struct engine *engine)
{
    const struct muscle_state *state = &engine->state;
    for (unsigned i = 0; i < state->lanes; i++) {
        const double drive =
            state->w[i] * state->A[i] * (state->C[i] + state->S[i]) / state->Km[i] * state->tau_c[i];
        if (state->phi[i] > QUIET * engine->scale[i] || drive > QUIET * engine->scale[i]) return false;
    }
    return true;
}

/* What is left when nothing drives: every state on its own exponential. */
static void relax(struct engine *engine, double to_ms)
{
    struct muscle_state *state = &engine->state;
    const struct muscle_parameters *p = &engine->muscle.parameters;
    const double h = to_ms - engine->time_ms;
    const double slow = exp(-h * engine->muscle.fatigue_rate), decay = exp(-h * engine->muscle.decay_rate);
    for (unsigned i = 0; i < state->lanes; i++) {
        const double e = exp(-h / state->tau_c[i]);
        state->phi[i] *= exp(-h * state->slower_inverse[i] / state->tau1[i]);
        state->C[i] = (state->C[i] + state->S[i] * h / state->tau_c[i]) * e;
        state->S[i] *= e;
        state->A[i] = p->A_rest_n_per_ms + (state->A[i] - p->A_rest_n_per_ms) * slow;
        state->Km[i] = p->Km_rest + (state->Km[i] - p->Km_rest) * slow;
        state->tau1[i] = p->tau1_rest_ms + (state->tau1[i] - p->tau1_rest_ms) * slow;
        state->P[i] *= decay;
        state->dA_least[i] = -(double)INFINITY;
        state->dtau1_most[i] = (double)INFINITY;
    }
    engine->time_ms = to_ms;
    engine->fresh = false;
}

static void make_fresh(struct engine *engine)
{
    if (engine->fresh) return;
    engine->fastest = refresh(engine, drive_factor(engine, engine->time_ms));
    engine->fresh = true;
}

static void stage_factors(const struct engine *engine, double h, double factor[STAGES])
{
    for (int s = 0; s < STAGES; s++)
        factor[s] = engine->motion ? motion_factor(engine->motion, engine->time_ms + node[s] * h)
                                   : engine->muscle.length;
}

/* A step of h went beyond a bound: finds the step that ends on it, by false position that halves a stale end
 * (Illinois). */
static double meet_bound(const struct engine *engine, struct trial *trial, double h)
{
    double factor[STAGES], low = 0, high = h;
    double at_low = beyond(engine, engine->state.A, engine->state.tau1);
    double at_high = beyond(engine, trial->y[LANE_A], trial->y[LANE_TAU1]);
    if (at_low > -1e-15) at_low = -1e-15; /* on it already, about to cross */
    double found = high;
    for (int i = 0; i < 60 && at_high > BOUND_NEAR && high - low > 1e-13 * high; i++) {
        found = low - at_low * (high - low) / (at_high - at_low);
        if (!(found > low) || !(found < high)) found = 0.5 * (low + high);
        stage_factors(engine, found, factor);
        try_step(engine, trial, found, factor);
        const double out = beyond(engine, trial->y[LANE_A], trial->y[LANE_TAU1]);
        if (fabs(out) <= BOUND_NEAR) return found;
        if (out > 0) {
            high = found;
            at_high = out;
            at_low *= 0.5;
        } else {
            low = found;
            at_low = out;
            at_high *= 0.5;
        }
    }
    stage_factors(engine, high, factor);
    try_step(engine, trial, high, factor);
    return high;
}

/* What an error over its tolerance lets the next step be, in steps: 0.9 error^(-1/5), within a percent. The
 * logarithm is read off the number's own bits, straight between powers of two. */
static double next_share(double error)
{
    int64_t bits;
    if (!(error > 1e-5)) return STEP_GROWTH_MOST;
    memcpy(&bits, &error, sizeof bits);
    const double logarithm = (double)(bits - ((int64_t)1023 << 52)) * 0x1p-52;
    const double exponent = -0.2 * logarithm; /* within -205 .. 4 */
    bits = (int64_t)((exponent + 1023) * 0x1p52);
    double share;
    memcpy(&share, &bits, sizeof share);
    share *= 0.9;
    return share < STEP_GROWTH_MOST ? share : STEP_GROWTH_MOST;
}

/* Tries steps until one is accepted; *ended: it goes to the very end. Returns its length. */
static double find_step(struct engine *engine, struct trial *trial, double left_ms, bool *ended)
{
    double factor[STAGES];
    for (;;) {
        double h = engine->step_ms;
        if (h > engine->step_most_ms && engine->time_ms < engine->quiet_ms) h = engine->step_most_ms;
        *ended = h >= left_ms;
        if (*ended)
            h = left_ms;
        else if (h > 0.5 * left_ms)
            h = 0.5 * left_ms;
        stage_factors(engine, h, factor);
        try_step(engine, trial, h, factor);
        const double share = next_share(trial->error);
        if (trial->error <= 1) {
            const double next_ms = h * share;
            if (next_ms > engine->step_ms || !*ended) engine->step_ms = next_ms;
            return h;
        }
        engine->rejected++;
        engine->step_ms = h * (share > 0.2 ? share : 0.2);
    }
}

void engine_step(struct engine *engine, double to_ms)
{
    struct trial trial;
    bool ended;
    if (!engine->given || (engine->time_ms > engine->quiet_ms && quiet(engine))) {
        relax(engine, to_ms);
        return;
    }
    if (engine->motion) {
        const double corner = motion_piece_end_ms(engine->motion, engine->time_ms);
        if (corner < to_ms) to_ms = corner;
    }
    make_fresh(engine);
    if (!(engine->step_ms > 0)) engine->step_ms = first_step(engine);
    double h = find_step(engine, &trial, to_ms - engine->time_ms, &ended);
    const bool met =
        trial.past > BOUND_NEAR && beyond(engine, trial.y[LANE_A], trial.y[LANE_TAU1]) > BOUND_NEAR;
    if (met) h = meet_bound(engine, &trial, h);
    take(engine, &trial);
    engine->time_ms = ended && !met ? to_ms : engine->time_ms + h;
    engine->steps++;
    if (met || engine->standing) settle_bounds(engine);
    if (engine->motion) engine->fresh = false; /* the drive may have a corner here */
}

void engine_advance(struct engine *engine, double to_ms)
{
    while (engine->time_ms < to_ms) engine_step(engine, to_ms);
}

void engine_pulse(struct engine *engine, double rho)
{
    if (!(rho > 0)) return;
    const unsigned before = engine->state.lanes;
    muscle_pulse(&engine->muscle, &engine->state, rho, engine->time_ms);
    for (unsigned k = 0; k < engine->muscle.pool.tiers; k++) {
        const unsigned lane = engine->state.lane[k];
        if (lane >= before && k > 0) engine->scale[lane] = engine->scale[engine->state.lane[k - 1]];
    }
    engine->given = true;
    engine->quiet_ms = engine->time_ms + engine->quiet_wait_ms;
    engine->fresh = false;
    engine->step_ms = 0;
}

double engine_force_n(const struct engine *engine)
{
    return muscle_force_n(&engine->state);
}

double engine_force_slope(struct engine *engine)
{
    if (!engine->given) return 0;
    make_fresh(engine);
    double sum = 0;
    for (unsigned i = 0; i < engine->state.lanes; i++)
        sum += engine->state.share[i] * engine->derivative[LANE_PHI][i];
    return sum;
}
