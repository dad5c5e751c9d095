/* The muscle at rest, at a pulse and as shown to people. The goal of this code: every sentence of the model
 * once, in the model's order. Sources: force and fatigue Ding et al. 2000 (J Appl Physiol 89:1322), 2003 (J
 * Electromyogr Kinesiol 13:575); R0 above Km Kesar and Binder-Macleod 2008; length and velocity Thelen 2003.
 * Tiers, potentiation and the cost of activation are this project's. */
#include "core/muscle/muscle.h"

#include "core/muscle/lanes.h"

#include <math.h>
#include <string.h>

struct usable {
    const char *key;
    double value, least, most;
    bool above; /* `least` itself is refused */
};

static enum status check_all(const struct usable *checks, size_t count, struct message *why)
{
    for (size_t i = 0; i < count; i++) {
        const struct usable *check = &checks[i];
        const bool low = check->above ? !(check->value > check->least) : !(check->value >= check->least);
        if (low || !(check->value <= check->most) || !isfinite(check->value))
            return status_fail(why, STATUS_REFUSED, "%s holds %g, it may hold %s %g to %g", check->key,
                               check->value, check->above ? "above" : "", check->least, check->most);
    }
    return STATUS_OK;
}

#define COUNT_OF(array) (sizeof(array) / sizeof(array)[0])

static enum status check_force(const struct muscle_parameters *p, struct message *why)
{
    const bool above = isfinite(p->R0_above_Km);
    const struct usable checks[] = {
        {"A_rest_n_per_ms", p->A_rest_n_per_ms, 0, 1e4, true},
        {"Km_rest", p->Km_rest, 0, 1e3, true},
        {above ? "R0_above_Km" : "R0", above ? p->R0_above_Km : p->R0, 0, 1e3, false},
        {"tau1_rest_ms", p->tau1_rest_ms, 0, 1e5, true},
        {"tau2_ms", p->tau2_ms, 0, 1e5, false},
        {"tau_c_ms", p->tau_c_ms, 0, 1e4, true},
        {"tau_fat_ms", p->tau_fat_ms, 0, 1e9, true},
        {"alpha_A_per_ms2", p->alpha_A_per_ms2, -1, 0, false},
        {"alpha_Km_per_ms_n", p->alpha_Km_per_ms_n, 0, 1, false},
        {"alpha_tau1_per_n", p->alpha_tau1_per_n, 0, 1, false},
        {"beta_A_per_pulse", p->beta_A_per_pulse, 0, 1, false},
        {"delay_ms", p->delay_ms, 0, 1e4, false},
        {"tone_n", p->tone_n, -1e6, 1e6, false},
    };
    return check_all(checks, COUNT_OF(checks), why);
}

static enum status check_recruitment(const struct recruitment *r, struct message *why)
{
    const struct usable strength[] = {{"rheobase_ma", r->rheobase_ma, 0, 1e4, true},
                                      {"chronaxie_us", r->chronaxie_us, 0, 1e6, false},
                                      {"spread", r->spread, 0, 100, true}};
    const struct usable exponential[] = {{"pd0_us", r->pd0_us, 0, 1e6, false},
                                         {"pdt_us", r->pdt_us, 0, 1e6, true},
                                         {"current_ma", r->current_ma, 0, 1e4, true}};
    if (r->law == RECRUITMENT_STRENGTH_DURATION) return check_all(strength, COUNT_OF(strength), why);
    if (r->law == RECRUITMENT_DURATION_EXPONENTIAL) return check_all(exponential, COUNT_OF(exponential), why);
    return STATUS_OK;
}

static enum status check_potentiation(const struct muscle_parameters *p, struct message *why)
{
    const struct usable checks[] = {{"gain", p->potentiation_gain, 0, 1e3, false},
                                    {"rise_ms", p->potentiation_rise_ms, 0, 1e9, true},
                                    {"decay_ms", p->potentiation_decay_ms, 0, 1e12, true}};
    return p->has_potentiation ? check_all(checks, COUNT_OF(checks), why) : STATUS_OK;
}

enum status muscle_init(struct muscle *muscle, const struct muscle_parameters *parameters,
                        struct message *why)
{
    const struct muscle_parameters *p = parameters;
    struct muscle made;
    memset(&made, 0, sizeof made);
    if (!p->has_force)
        return status_fail(why, STATUS_REFUSED, "force is missing: only `fit` takes a muscle without it");
    enum status status = check_force(p, why);
    if (status == STATUS_OK) status = check_recruitment(&p->recruitment, why);
    if (status == STATUS_OK) status = check_potentiation(p, why);
    if (status == STATUS_OK) status = pool_make(p, &made.pool, why);
    if (status != STATUS_OK) return status;
    if (p->alpha_tau1_per_n != 0 && p->alpha_A_per_ms2 == 0)
        return status_fail(why, STATUS_REFUSED,
                           "alpha_tau1_per_n holds %g and alpha_A_per_ms2 0: slowing without loss of force "
                           "feeds itself, give both or neither",
                           p->alpha_tau1_per_n);
    made.parameters = *p;
    made.length = isfinite(p->length_relative) ? muscle_length_factor(p->length_relative) : p->length_factor;
    const struct usable length = {"length", made.length, 0, 1e3, false};
    if (check_all(&length, 1, why) != STATUS_OK) return STATUS_REFUSED;
    if (p->has_potentiation) {
        made.gain = p->potentiation_gain;
        made.rise_rate = 1 / p->potentiation_rise_ms;
        made.decay_rate = 1 / p->potentiation_decay_ms;
    }
    made.fatigue_rate = 1 / p->tau_fat_ms;
    made.tau1_most_ms = 5 * p->tau1_rest_ms;
    *muscle = made;
    return STATUS_OK;
}

/* A lane at rest with the constants of tier k. */
static void rest_lane(const struct muscle *muscle, struct muscle_state *state, unsigned lane, unsigned k)
{
    const struct muscle_parameters *p = &muscle->parameters;
    state->A[lane] = p->A_rest_n_per_ms;
    state->Km[lane] = p->Km_rest;
    state->tau1[lane] = p->tau1_rest_ms;
    state->P[lane] = p->has_potentiation ? 0 : 1;
    state->tau_c[lane] = muscle->pool.slower[k] * p->tau_c_ms;
    state->slower_inverse[lane] = 1 / muscle->pool.slower[k];
    state->fatigue[lane] = muscle->pool.fatigue[k];
    state->dA_least[lane] = -(double)INFINITY;
    state->dtau1_most[lane] = (double)INFINITY;
    state->t_last[lane] = MUSCLE_NEVER;
}

void muscle_rest(const struct muscle *muscle, struct muscle_state *state)
{
    const struct pool *pool = &muscle->pool;
    memset(state, 0, sizeof *state);
    for (unsigned lane = 0; lane < LANES_MAX; lane++)
        rest_lane(muscle, state, lane, lane < pool->tiers ? lane : 0);
    for (unsigned k = 0; k < pool->tiers; k++) {
        const unsigned lane = muscle->parameters.has_pool ? k : 0;
        state->lane[k] = (unsigned char)lane;
        state->share[lane] += pool->share[k];
    }
    state->lanes = muscle->parameters.has_pool ? pool->tiers : 1;
}

/* Copies what lane `from` has lived through into lane `to` (not its share). */
static void copy_lane(struct muscle_state *state, unsigned to, unsigned from)
{
    state->C[to] = state->C[from];
    state->S[to] = state->S[from];
    state->phi[to] = state->phi[from];
    state->A[to] = state->A[from];
    state->Km[to] = state->Km[from];
    state->tau1[to] = state->tau1[from];
    state->P[to] = state->P[from];
    state->w[to] = state->w[from];
    state->tau_c[to] = state->tau_c[from];
    state->slower_inverse[to] = state->slower_inverse[from];
    state->fatigue[to] = state->fatigue[from];
    state->dA_least[to] = state->dA_least[from];
    state->dtau1_most[to] = state->dtau1_most[from];
    state->t_last[to] = state->t_last[from];
}

/* Where a pulse weighs tiers of one lane differently they part: the first keeps the lane, the others take a
 * new one. Tiers of a lane are neighbours in order of recruitment, because weights fall along it. */
static void part_lanes(const struct muscle *muscle, struct muscle_state *state, const double *weight)
{
    unsigned before = state->lane[0];
    for (unsigned k = 1; k < muscle->pool.tiers; k++) {
        const unsigned old = state->lane[k];
        if (old == before && weight[k] != weight[k - 1]) {
            copy_lane(state, state->lanes, old);
            state->lane[k] = (unsigned char)state->lanes++;
        } else if (old == before) {
            state->lane[k] = state->lane[k - 1];
        }
        if (state->lane[k] != old) {
            state->share[old] -= muscle->pool.share[k];
            state->share[state->lane[k]] += muscle->pool.share[k];
        }
        before = old;
    }
}

/* Steps 2 to 5 of a pulse on every lane whose weight is above 0. */
LANES_CLONES static void touch_lanes(const struct muscle_parameters *p, struct muscle_state *state,
                                     const double *weight, double time_ms)
{
    const bool above = isfinite(p->R0_above_Km);
    const lanes_t zero = {0}, one = zero + 1, now = zero + time_ms;
    for (unsigned at = 0; at < state->lanes; at += LANE_WIDTH) {
        const lanes_t w = *(const lanes_t *)&weight[at];
        const lanes_mask_t touched = w > zero;
        lanes_t *t_last = (lanes_t *)&state->t_last[at], *S = (lanes_t *)&state->S[at],
                *A = (lanes_t *)&state->A[at];
        lanes_t *old_w = (lanes_t *)&state->w[at];
        const lanes_t since = (*t_last - now) / *(const lanes_t *)&state->tau_c[at];
        lanes_t e, add, kept = 1 - p->beta_A_per_pulse * *(const lanes_t *)&state->fatigue[at] * w;
        lanes_exp(&e, &since);
        const lanes_t R0 = above ? *(const lanes_t *)&state->Km[at] + p->R0_above_Km : zero + p->R0;
        const lanes_t R = 1 + (R0 - 1) * e;
        lanes_select(&add, &touched, &R, &zero);
        *S += add;
        lanes_greater(&kept, &kept, &zero);
        lanes_select(&kept, &touched, &kept, &one);
        *A *= kept;
        lanes_select(t_last, &touched, &now, t_last);
        lanes_select(old_w, &touched, &w, old_w);
    }
}

void muscle_pulse(const struct muscle *muscle, struct muscle_state *state, double rho, double time_ms)
{
    double weight[MUSCLE_TIERS_MAX];
    LANE_ALIGNED double of_lane[LANES_MAX];
    if (!(rho > 0)) return;
    pool_recruit(&muscle->pool, rho, weight);
    if (!muscle->parameters.has_pool) part_lanes(muscle, state, weight);
    memset(of_lane, 0, sizeof of_lane);
    for (unsigned k = 0; k < muscle->pool.tiers; k++) of_lane[state->lane[k]] = weight[k];
    touch_lanes(&muscle->parameters, state, of_lane, time_ms);
}

double muscle_force_n(const struct muscle_state *state)
{
    double sum = 0;
    for (unsigned i = 0; i < state->lanes; i++) sum += state->share[i] * state->phi[i];
    return sum;
}

double muscle_capacity(const struct muscle *muscle, const struct muscle_state *state)
{
    double sum = 0;
    for (unsigned i = 0; i < state->lanes; i++) sum += state->share[i] * state->A[i];
    return sum / muscle->parameters.A_rest_n_per_ms;
}

double muscle_potentiation(const struct muscle_state *state)
{
    double sum = 0;
    for (unsigned i = 0; i < state->lanes; i++) sum += state->share[i] * state->P[i];
    return sum;
}

double muscle_activation(const struct muscle *muscle, const struct muscle_state *state)
{
    double sum = 0;
    for (unsigned i = 0; i < state->lanes; i++) {
        const double half = state->Km[i] * (1 + muscle->gain * (1 - state->P[i]));
        sum += state->share[i] * state->w[i] * state->C[i] / (half + state->C[i]);
    }
    return sum;
}

/* Steady mean force of one lane but for its share, at rate f (1/ms) and P = 1. */
static double fused(const struct muscle_parameters *p, double A, double Km, double tau1, double tau_c,
                    double per_ms)
{
    const double R0 = isfinite(p->R0_above_Km) ? Km + p->R0_above_Km : p->R0;
    const double R = 1 + (R0 - 1) * exp(-1 / (per_ms * tau_c));
    const double mean = R * tau_c * per_ms;
    const double x = mean / (Km + mean);
    return A * x * (tau1 + p->tau2_ms * x);
}

double muscle_force_remaining(const struct muscle *muscle, const struct muscle_state *state,
                              double frequency_pps)
{
    const struct muscle_parameters *p = &muscle->parameters;
    const double per_ms = frequency_pps / 1000;
    double now = 0, rested = 0;
    for (unsigned i = 0; i < state->lanes; i++) {
        now += state->share[i] * fused(p, state->A[i], state->Km[i], state->tau1[i], state->tau_c[i], per_ms);
        rested += state->share[i] *
                  fused(p, p->A_rest_n_per_ms, p->Km_rest, p->tau1_rest_ms, state->tau_c[i], per_ms);
    }
    return now / rested;
}

double muscle_length_factor(double relative_length)
{
    return exp(-(relative_length - 1) * (relative_length - 1) / 0.45);
}

double muscle_velocity_factor(double relative_velocity)
{
    const double u = relative_velocity;
    if (u <= -1) return 0;
    if (u <= 0) return (1 + u) / (1 - u / 0.25);
    return (1 + 35 * u) / (1 + 25 * u);
}

struct muscle_parameters muscle_at_length(const struct muscle_parameters *parameters, double length_mm)
{
    struct muscle_parameters at = *parameters;
    if (!isfinite(at.length_reference_mm)) return at;
    const double centimetres = (length_mm - at.length_reference_mm) / 10;
    if (isfinite(at.slope_Km)) at.Km_rest *= exp(at.slope_Km * centimetres);
    if (isfinite(at.slope_tau1)) at.tau1_rest_ms *= exp(at.slope_tau1 * centimetres);
    if (isfinite(at.slope_tau_c)) at.tau_c_ms *= exp(at.slope_tau_c * centimetres);
    return at;
}
