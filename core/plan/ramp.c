/* Ramp choice. The goal of this code: the shape and length are found by running them, and the losers are kept
 * to be shown. Rule (design, Plan): reach the hold within rise_ms_max and the slew limit with the least
 * overshoot, then the least force-time integral outside the hold, then linear. Overshoot below 0 counts as 0
 * and differences below 0.1 % count as none: finer ones are the engine's tolerance and the grid, not the
 * ramp. The ramp down has the same shape and takes the demand's release_ms. */
#include "core/plan/ramp.h"

#include <math.h>
#include <string.h>

enum { LENGTHS_LONG = 6 };
/* Shares of the latest rise: all of them, or the few of a scan. */
static const double lengths[] = {0.0, 0.2, 0.35, 0.5, 0.6, 0.7, 0.8, 0.9}, lengths_few[] = {0.5, 0.7, 0.85};
static const double strain_most =
    0.93; /* the muscle slows as it tires: what only just fits will not for long */
static const double overshoot_same_percent = 0.1, outside_same = 1e-3;

/* What one shape and length came to. */
struct trial {
    struct plan_ramp_trial seen;
    bool slew_kept;
    double strain;
    struct dose_verdict broken;
};

static double overshoot_counted(const struct trial *trial)
{
    return fmax(trial->seen.overshoot_percent, 0.0);
}

/* How far the ramp is from what the demand asks of it, as the greatest share of a bound: rise, overshoot, and
 * ripple, to which a force that still climbs as the hold begins adds. At most 1: in time. */
static double strain_of(const struct demand *demand, const struct hold_measures *hold)
{
    const double ripple = hold->ripple_percent / demand->ripple_percent_max;
    const double rise = hold->rise_ms / demand->rise_ms_max;
    const double over = hold->overshoot_percent / demand->overshoot_percent_max;
    if (isnan(ripple) || isnan(rise) || isnan(over)) return 1e6 + (isnan(ripple) ? 0.0 : ripple);
    return fmax(fmax(ripple, rise), over);
}

/* Is a the better ramp? Slew, then what is asked of it, then overshoot, then force-time outside; what is
 * equal goes to the earlier tried: linear first. */
static bool better(const struct trial *a, const struct trial *b)
{
    if (a->slew_kept != b->slew_kept) return a->slew_kept;
    if (a->strain > strain_most || b->strain > strain_most) return a->strain < b->strain;
    const double over = overshoot_counted(a) - overshoot_counted(b);
    if (fabs(over) >= overshoot_same_percent) return over < 0.0;
    return a->seen.outside_n_s < b->seen.outside_n_s * (1.0 - outside_same);
}

static enum status run_trial(struct attempt_bench *bench, const struct solve_request *request,
                             const struct demand *demand, const struct solve_settings *settings,
                             const struct dose_channel *guard, uint64_t start_us, enum ramp_shape shape,
                             double ms, struct trial *trial, struct message *why)
{
    struct solve_request own = *request;
    own.frame.ramp_up.shape = own.frame.ramp_down.shape = shape;
    own.frame.ramp_up.ms = ms;
    struct solve_result result;
    const enum status status = solve_step(bench, &own, settings, &result, why);
    if (status != STATUS_OK) return status;
    struct dose_channel played = *guard;
    trial->broken = attempt_guard(bench, start_us, &played);
    trial->slew_kept = trial->broken.figure != DOSE_SLEW;
    const struct hold_measures *hold = &result.attempt.hold;
    trial->strain = strain_of(demand, hold);
    trial->seen = (struct plan_ramp_trial){.shape = shape,
                                           .ms = ms,
                                           .rise_ms = hold->rise_ms,
                                           .overshoot_percent = hold->overshoot_percent,
                                           .outside_n_s = hold->force_time_integral_outside_n_s};
    return STATUS_OK;
}

/* Length number i, to 10 ms; beyond the list come, should slew need them, longer ones up to eight times the
 * latest rise. */
static double length_ms(const struct demand *demand, const double *shares, size_t count, size_t i)
{
    const double share = i < count ? shares[i] : pow(2.0, 0.5 * (double)(i - count + 1));
    return floor(demand->rise_ms_max * share / 10.0) * 10.0;
}

/* The best length of one shape. */
static enum status best_length(struct attempt_bench *bench, const struct solve_request *request,
                               const struct demand *demand, const struct solve_settings *settings,
                               const struct dose_channel *guard, uint64_t start_us, enum ramp_shape shape,
                               bool few, struct trial *best, struct message *why)
{
    const double *shares = few ? lengths_few : lengths;
    const size_t count = few ? sizeof lengths_few / sizeof *lengths_few : sizeof lengths / sizeof *lengths;
    bool any = false;
    for (size_t i = 0; i < count + LENGTHS_LONG; i++) {
        if (i >= count && best->slew_kept) break;
        struct trial trial;
        const enum status status = run_trial(bench, request, demand, settings, guard, start_us, shape,
                                             length_ms(demand, shares, count, i), &trial, why);
        if (status != STATUS_OK) return status;
        if (!any || better(&trial, best)) *best = trial;
        any = true;
    }
    return STATUS_OK;
}

enum status ramp_choose(struct attempt_bench *bench, const struct solve_request *request,
                        const struct demand *demand, const struct solve_settings *settings,
                        const struct dose_channel *guard, uint64_t start_us, bool few,
                        struct ramp_choice *choice, struct message *why)
{
    static const enum ramp_shape shapes[] = {RAMP_LINEAR, RAMP_RAISED_COSINE, RAMP_EXPONENTIAL};
    struct trial winner = {0};
    size_t chosen = 0;
    choice->trials = 0;
    for (size_t s = 0; s < sizeof shapes / sizeof *shapes; s++) {
        if (!demand->ramp[shapes[s]]) continue;
        struct trial best = {0};
        const enum status status =
            best_length(bench, request, demand, settings, guard, start_us, shapes[s], few, &best, why);
        if (status != STATUS_OK) return status;
        if (choice->trials == 0 || better(&best, &winner)) {
            winner = best;
            chosen = choice->trials;
        }
        choice->trial[choice->trials++] = best.seen;
        if (few && best.slew_kept && best.strain <= strain_most)
            break; /* a scan takes the first shape that does */
    }
    if (choice->trials == 0) return status_fail(why, STATUS_REFUSED, "the demand allows no ramp shape");
    choice->trial[chosen].chosen = true;
    choice->shape = winner.seen.shape;
    choice->ms = winner.seen.ms;
    choice->slew_kept = winner.slew_kept;
    choice->broken = winner.broken;
    return STATUS_OK;
}
