/* The reference integration. The goal of this code: agree with the model chapter and with nothing else; slow
 * is fine. Integrator: SUNDIALS CVODE (Hindmarsh et al. 2005), Adams with fixed-point iteration, restarted at
 * every pulse. */
#include "support/cvode_muscle.h"

#include <cvode/cvode.h>
#include <math.h>
#include <nvector/nvector_serial.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sunnonlinsol/sunnonlinsol_fixedpoint.h>

enum { TIERS = 32, EACH = 7 };
enum { AT_S, AT_C, AT_F, AT_A, AT_KM, AT_TAU1, AT_P };

/* One tier's constants and what pulses do to it. */
struct tier {
    double share, theta, fatigue, tau_c;
    double w, last_ms;
    bool touched, stopped_A, stopped_tau1;
    double S0, C0; /* at base_ms, for the closed form */
};
struct reference {
    const struct muscle_parameters *p;
    int tiers;
    struct tier tier[TIERS];
    double length, base_ms;
    bool closed_form;
};

static void die(const char *what)
{
    fprintf(stderr, "reference: %s\n", what);
    abort();
}

static void make_pool(struct reference *r)
{
    const struct muscle_parameters *p = r->p;
    double sum = 0, theta = 0, fatigue = 0;
    r->tiers = (int)p->tiers;
    for (int k = 0; k < r->tiers; k++) {
        struct tier *tier = &r->tier[k];
        memset(tier, 0, sizeof *tier);
        const int rank = p->has_pool && p->pool_order == POOL_REVERSED ? r->tiers - 1 - k : k;
        const double q = r->tiers > 1 ? rank / (r->tiers - 1.0) : 0;
        tier->share = p->has_pool ? pow(p->force_range, q) : 1;
        tier->theta = p->has_pool ? pow(p->speed_range, -(q - 0.5)) : 1;
        tier->fatigue = p->has_pool ? pow(p->fatigue_range, q - 0.5) : 1;
        sum += tier->share;
    }
    for (int k = 0; k < r->tiers; k++) {
        r->tier[k].share /= sum;
        theta += r->tier[k].share * r->tier[k].theta;
        fatigue += r->tier[k].share * r->tier[k].fatigue;
    }
    for (int k = 0; k < r->tiers; k++) {
        r->tier[k].theta /= theta;
        r->tier[k].fatigue /= fatigue;
        r->tier[k].tau_c = r->tier[k].theta * p->tau_c_ms;
    }
}

static double fraction(const struct recruitment *law, const struct train_pulse *pulse)
{
    double rho = 1;
    if (law->law == RECRUITMENT_STRENGTH_DURATION)
        rho =
            0.5 *
            erfc(-log(pulse->current_ma / (law->rheobase_ma * (1 + law->chronaxie_us / pulse->duration_us))) /
                 law->spread / sqrt(2));
    if (law->law == RECRUITMENT_DURATION_EXPONENTIAL)
        rho =
            pulse->duration_us > law->pd0_us ? 1 - exp(-(pulse->duration_us - law->pd0_us) / law->pdt_us) : 0;
    return rho < 0.001 ? 0 : rho;
}

/* Right-hand sides of A and tau1 as they are without bounds. F is the tier's force. */
static double raw_A(const struct muscle_parameters *p, const struct tier *tier, double A, double F)
{
    return -(A - p->A_rest_n_per_ms) / p->tau_fat_ms + tier->fatigue * p->alpha_A_per_ms2 * F / tier->share;
}
static double raw_tau1(const struct muscle_parameters *p, const struct tier *tier, double tau1, double F)
{
    return -(tau1 - p->tau1_rest_ms) / p->tau_fat_ms + tier->fatigue * p->alpha_tau1_per_n * F / tier->share;
}

/* F is integrated as F_k/(s_k A_rest) and A as A/A_rest, so that one absolute tolerance fits all. */
static int slopes(realtype t, N_Vector vector, N_Vector slope, void *context)
{
    const struct reference *r = context;
    const struct muscle_parameters *p = r->p;
    for (int k = 0; k < r->tiers; k++) {
        const struct tier *tier = &r->tier[k];
        const realtype *y = N_VGetArrayPointer(vector) + k * EACH;
        realtype *dy = N_VGetArrayPointer(slope) + k * EACH;
        double C = y[AT_C];
        if (r->closed_form)
            C = (tier->C0 + tier->S0 * (t - r->base_ms) / tier->tau_c) * exp(-(t - r->base_ms) / tier->tau_c);
        const double sensitivity =
            y[AT_KM] * (1 + (p->has_potentiation ? p->potentiation_gain * (1 - y[AT_P]) : 0));
        const double x = C / (sensitivity + C);
        const double A = y[AT_A] * p->A_rest_n_per_ms, phi = y[AT_F] * p->A_rest_n_per_ms,
                     F = phi * tier->share;
        dy[AT_S] = r->closed_form ? 0 : -y[AT_S] / tier->tau_c;
        dy[AT_C] = r->closed_form ? 0 : (y[AT_S] - y[AT_C]) / tier->tau_c;
        dy[AT_F] = (tier->w * r->length * A * x - phi / (y[AT_TAU1] + p->tau2_ms * x)) / tier->theta /
                   p->A_rest_n_per_ms;
        dy[AT_A] = tier->stopped_A ? 0 : raw_A(p, tier, A, F) / p->A_rest_n_per_ms;
        dy[AT_KM] = -(y[AT_KM] - p->Km_rest) / p->tau_fat_ms + tier->fatigue * p->alpha_Km_per_ms_n * phi;
        dy[AT_TAU1] = tier->stopped_tau1 ? 0 : raw_tau1(p, tier, y[AT_TAU1], F);
        dy[AT_P] = p->has_potentiation
                       ? x * (1 - y[AT_P]) / p->potentiation_rise_ms - y[AT_P] / p->potentiation_decay_ms
                       : 0;
    }
    return 0;
}

/* Zero where a tier meets a bound, or where a stopped one is let go. */
static int bounds(realtype t, N_Vector vector, realtype *root, void *context)
{
    const struct reference *r = context;
    (void)t;
    for (int k = 0; k < r->tiers; k++) {
        const struct tier *tier = &r->tier[k];
        const realtype *y = N_VGetArrayPointer(vector) + k * EACH;
        const double A = y[AT_A] * r->p->A_rest_n_per_ms, F = y[AT_F] * r->p->A_rest_n_per_ms * tier->share;
        root[2 * k] = tier->stopped_A ? raw_A(r->p, tier, A, F) : y[AT_A];
        root[2 * k + 1] =
            tier->stopped_tau1 ? raw_tau1(r->p, tier, y[AT_TAU1], F) : 5 * r->p->tau1_rest_ms - y[AT_TAU1];
    }
    return 0;
}

static void pulse_on(struct reference *r, realtype *all, const struct train_pulse *pulse)
{
    const struct muscle_parameters *p = r->p;
    const double rho = fraction(&p->recruitment, pulse);
    double before = 0;
    for (int k = 0; k < r->tiers; k++) {
        struct tier *tier = &r->tier[k];
        realtype *y = all + k * EACH;
        const double w = fmin(fmax((rho - before) / tier->share, 0), 1);
        before += tier->share;
        if (w <= 1e-12) continue; /* rounding of the shares' sum */
        const double R0 = isnan(p->R0) ? y[AT_KM] + p->R0_above_Km : p->R0;
        const double R =
            tier->touched ? 1 + (R0 - 1) * exp(-(pulse->time_ms - tier->last_ms) / tier->tau_c) : 1;
        tier->w = w;
        y[AT_S] += R;
        y[AT_A] *= fmax(0, 1 - p->beta_A_per_pulse * tier->fatigue * w);
        tier->touched = true;
        tier->last_ms = pulse->time_ms;
    }
}

/* A pulse may push force below or above what let a tier go or holds it: flags anew from the state. */
static void set_flags(struct reference *r, realtype *all)
{
    for (int k = 0; k < r->tiers; k++) {
        struct tier *tier = &r->tier[k];
        realtype *y = all + k * EACH;
        const double F = y[AT_F] * r->p->A_rest_n_per_ms * tier->share;
        if (y[AT_A] <= 1e-14) y[AT_A] = 0;
        if (y[AT_TAU1] >= 5 * r->p->tau1_rest_ms * (1 - 1e-14)) y[AT_TAU1] = 5 * r->p->tau1_rest_ms;
        tier->stopped_A = y[AT_A] == 0 && raw_A(r->p, tier, 0, F) < 0;
        tier->stopped_tau1 = y[AT_TAU1] == 5 * r->p->tau1_rest_ms && raw_tau1(r->p, tier, y[AT_TAU1], F) > 0;
    }
}

static void note_roots(struct reference *r, realtype *all, const int *found)
{
    for (int k = 0; k < r->tiers; k++) {
        struct tier *tier = &r->tier[k];
        realtype *y = all + k * EACH;
        if (found[2 * k]) {
            if (!tier->stopped_A) y[AT_A] = 0;
            tier->stopped_A = !tier->stopped_A;
        }
        if (found[2 * k + 1]) {
            if (!tier->stopped_tau1) y[AT_TAU1] = 5 * r->p->tau1_rest_ms;
            tier->stopped_tau1 = !tier->stopped_tau1;
        }
    }
}

/* C and S by their closed form from base_ms to now, put into the state; base moves to now. */
static void rebase(struct reference *r, realtype *all, double now_ms)
{
    for (int k = 0; k < r->tiers && r->closed_form; k++) {
        struct tier *tier = &r->tier[k];
        const double h = (now_ms - r->base_ms) / tier->tau_c, e = exp(-h);
        all[k * EACH + AT_C] = (tier->C0 + tier->S0 * h) * e;
        all[k * EACH + AT_S] = tier->S0 * e;
    }
    r->base_ms = now_ms;
}

static void keep_base(struct reference *r, const realtype *all)
{
    for (int k = 0; k < r->tiers; k++) {
        r->tier[k].C0 = all[k * EACH + AT_C];
        r->tier[k].S0 = all[k * EACH + AT_S];
    }
}

static void read_out(const struct reference *r, const realtype *all, double *force_n, double *capacity,
                     double *potentiation)
{
    *force_n = *capacity = 0;
    if (potentiation) *potentiation = 0;
    for (int k = 0; k < r->tiers; k++) {
        *force_n += r->tier[k].share * all[k * EACH + AT_F] * r->p->A_rest_n_per_ms;
        *capacity += r->tier[k].share * all[k * EACH + AT_A];
        if (potentiation) *potentiation += r->tier[k].share * all[k * EACH + AT_P];
    }
}

void cvode_run(const struct muscle_parameters *p, const struct train_pulse *pulses, size_t count,
               const struct cvode_settings *settings, const double *sample_ms, size_t samples,
               double *force_n, double *capacity, double *potentiation, long *steps)
{
    struct reference r = {.p = p, .closed_form = settings->closed_form};
    make_pool(&r);
    r.length = isnan(p->length_factor) ? exp(-(p->length_relative - 1) * (p->length_relative - 1) / 0.45)
                                       : p->length_factor;
    SUNContext sun;
    if (SUNContext_Create(NULL, &sun)) die("no context");
    N_Vector y = N_VNew_Serial(r.tiers * EACH, sun);
    realtype *all = N_VGetArrayPointer(y);
    memset(all, 0, (size_t)(r.tiers * EACH) * sizeof *all);
    for (int k = 0; k < r.tiers; k++) {
        all[k * EACH + AT_A] = 1;
        all[k * EACH + AT_KM] = p->Km_rest;
        all[k * EACH + AT_TAU1] = p->tau1_rest_ms;
        all[k * EACH + AT_P] = p->has_potentiation ? 0 : 1;
    }
    void *cvode = CVodeCreate(CV_ADAMS, sun);
    SUNNonlinearSolver solver = SUNNonlinSol_FixedPoint(y, 0, sun);
    double now = 0;
    if (CVodeInit(cvode, slopes, now, y) || CVodeSStolerances(cvode, settings->rtol, settings->atol) ||
        CVodeSetUserData(cvode, &r) || CVodeSetNonlinearSolver(cvode, solver) ||
        CVodeRootInit(cvode, 2 * r.tiers, bounds) || CVodeSetNoInactiveRootWarn(cvode) ||
        CVodeSetMaxNumSteps(cvode, 100000000))
        die("set-up failed");
    if (settings->order_max > 0) CVodeSetMaxOrd(cvode, settings->order_max);
    size_t pulse = 0, sample = 0;
    bool restart = false, any = false;
    long total = 0, part = 0;
    int found[2 * TIERS];
    while (sample < samples) {
        if (pulse < count && pulses[pulse].time_ms <= sample_ms[sample] && now >= pulses[pulse].time_ms) {
            rebase(&r, all, now);
            pulse_on(&r, all, &pulses[pulse++]);
            keep_base(&r, all);
            set_flags(&r, all);
            restart = any = true;
            continue;
        }
        if (now >= sample_ms[sample]) {
            read_out(&r, all, &force_n[sample], &capacity[sample],
                     potentiation ? &potentiation[sample] : NULL);
            sample++;
            continue;
        }
        const double to = pulse < count && pulses[pulse].time_ms < sample_ms[sample] ? pulses[pulse].time_ms
                                                                                     : sample_ms[sample];
        if (!any) { /* at rest nothing moves */
            now = to;
            restart = true;
            continue;
        }
        if (restart) {
            if (CVodeGetNumSteps(cvode, &part) == 0) total += part;
            if (CVodeReInit(cvode, now, y)) die("restart failed");
            restart = false;
        }
        CVodeSetStopTime(cvode, pulse < count ? pulses[pulse].time_ms : sample_ms[samples - 1] + 1);
        const int outcome = CVode(cvode, to, y, &now, CV_NORMAL);
        if (outcome < 0) die("CVODE failed");
        if (outcome == CV_ROOT_RETURN) {
            CVodeGetRootInfo(cvode, found);
            note_roots(&r, all, found);
            restart = true;
        }
    }
    CVodeGetNumSteps(cvode, &part);
    if (steps) *steps = total + part;
    SUNNonlinSolFree(solver);
    N_VDestroy(y);
    CVodeFree(&cvode);
    SUNContext_Free(&sun);
}

/* ---- the published model on its own: dC as the sum over pulses, written as its authors do ---- */

struct published {
    const struct muscle_parameters *p;
    const double *pulse_ms;
    size_t given; /* pulses so far */
};

/* dC/dt = (1/tau_c) sum_i R_i exp(-(t - t_i)/tau_c) - C/tau_c, R_1 = 1, R_i = 1 + (R0 - 1) exp(-(t_i -
 * t_(i-1))/tau_c) */
static int published_slopes(realtype t, N_Vector vector, N_Vector slope, void *context)
{
    const struct published *m = context;
    const struct muscle_parameters *p = m->p;
    const realtype *y = N_VGetArrayPointer(vector);
    realtype *dy = N_VGetArrayPointer(slope);
    double sum = 0;
    for (size_t i = 0; i < m->given; i++) {
        const double R =
            i == 0 ? 1 : 1 + (p->R0 - 1) * exp(-(m->pulse_ms[i] - m->pulse_ms[i - 1]) / p->tau_c_ms);
        sum += R * exp(-(t - m->pulse_ms[i]) / p->tau_c_ms);
    }
    const double C = y[0], F = y[1], A = y[2], Km = y[3], tau1 = y[4];
    dy[0] = sum / p->tau_c_ms - C / p->tau_c_ms;
    dy[1] = A * C / (Km + C) - F / (tau1 + p->tau2_ms * C / (Km + C));
    dy[2] = -(A - p->A_rest_n_per_ms) / p->tau_fat_ms + p->alpha_A_per_ms2 * F;
    dy[3] = -(Km - p->Km_rest) / p->tau_fat_ms + p->alpha_Km_per_ms_n * F;
    dy[4] = -(tau1 - p->tau1_rest_ms) / p->tau_fat_ms + p->alpha_tau1_per_n * F;
    return 0;
}

void cvode_run_published(const struct muscle_parameters *p, const double *pulse_ms, size_t count,
                         const double *sample_ms, size_t samples, double *force_n, double *A)
{
    struct published m = {.p = p, .pulse_ms = pulse_ms};
    SUNContext sun;
    if (SUNContext_Create(NULL, &sun)) die("no context");
    N_Vector y = N_VNew_Serial(5, sun);
    realtype *state = N_VGetArrayPointer(y);
    memcpy(state, (const double[]){0, 0, p->A_rest_n_per_ms, p->Km_rest, p->tau1_rest_ms},
           5 * sizeof(double));
    void *cvode = CVodeCreate(CV_ADAMS, sun);
    SUNNonlinearSolver solver = SUNNonlinSol_FixedPoint(y, 0, sun);
    double now = 0;
    if (CVodeInit(cvode, published_slopes, 0, y) || CVodeSStolerances(cvode, 1e-10, 1e-13) ||
        CVodeSetUserData(cvode, &m) || CVodeSetNonlinearSolver(cvode, solver) ||
        CVodeSetMaxNumSteps(cvode, 100000000))
        die("set-up failed");
    bool restart = true;
    for (size_t sample = 0; sample < samples;) {
        if (m.given < count && pulse_ms[m.given] <= sample_ms[sample] && now >= pulse_ms[m.given]) {
            m.given++;
            restart = true;
            continue;
        }
        if (now >= sample_ms[sample]) {
            force_n[sample] = state[1];
            A[sample++] = state[2];
            continue;
        }
        const double to =
            m.given < count && pulse_ms[m.given] < sample_ms[sample] ? pulse_ms[m.given] : sample_ms[sample];
        if (restart && CVodeReInit(cvode, now, y)) die("restart failed");
        restart = false;
        CVodeSetStopTime(cvode, m.given < count ? pulse_ms[m.given] : sample_ms[samples - 1] + 1);
        if (CVode(cvode, to, y, &now, CV_NORMAL) < 0) die("CVODE failed");
    }
    SUNNonlinSolFree(solver);
    N_VDestroy(y);
    CVodeFree(&cvode);
    SUNContext_Free(&sun);
}
