/* Iso-force settings with trim. The goal of this code: few attempts, each a full run of quantised pulses,
 * until no neighbour on the grid is promising. Method: Broyden's (1965) in two unknowns and two equations.
 * Unknowns: the level and the slope of recruitment over the hold, as logarithms of what is recruited an
 * eighth into the hold and seven eighths into it (the middles of its outer quarters). Equations: the
 * logarithm of mean over target, and the rise from first to last quarter over the mean. The 2 x 2 slope
 * matrix is carried from contraction to contraction, so most need two or three attempts. Where settings end,
 * the free end of the trim is found by bisection on the grid. The rule on what is nearest is the design's
 * (Plan). */
#include "core/plan/solve.h"

#include <math.h>
#include <string.h>

const double solve_keep_share = 0.2;
enum { ROUNDS = 8, POLISH_ROUNDS = 3, MEMORY = 32, CURRENT_TRIES = 5 };
static const double quarter_middle = 0.125; /* of the hold: middle of its first quarter */
static const double level_percent =
    2.0; /* quarters within this, and within two fifths of the droop allowed, count as level */
static const double first_gain = 1.5; /* relative force for relative recruitment, before anything is known */
static const double step_most = 0.7;  /* of a logarithm, in one round */

/* The grid of the moving knob at one value of the other. */
struct rail {
    uint32_t from, to, step;
    uint32_t other;
};

/* Attempts already made on this rail, so that none is made twice. */
struct memory {
    size_t used;
    struct {
        uint32_t from, to;
        struct attempt_result attempt;
    } entry[MEMORY];
};

/* Level and slope of recruitment, or of force. */
struct pair {
    double level, slope;
};

struct solver {
    struct attempt_bench *bench;
    const struct solve_request *request;
    struct rail rail;
    struct memory memory;
    struct solve_slopes slopes;
    struct solve_result stands; /* the last run: what the bench still holds; contraction.repeat 0: none */
    struct message *why;
};

static struct rail rail_at(const struct attempt_bench *bench, uint32_t other)
{
    const struct settings_space *space = &bench->space;
    struct rail rail = {.other = other};
    if (space->knob == KNOB_CURRENT) {
        rail.from = space->current_from_ua;
        rail.to = settings_current_to(space, other, NULL);
        rail.step = space->grid.current_step_ua ? space->grid.current_step_ua : 1;
    } else {
        rail.from = space->duration_from_us;
        rail.to = settings_duration_to(space, other, NULL);
        rail.step = space->grid.duration_step_us ? space->grid.duration_step_us : 1;
        if (space->knob == KNOB_NONE) rail.from = rail.to;
    }
    if (rail.to < rail.from) rail.from = rail.to; /* nothing is left at this value: the caller sees share 0 */
    return rail;
}

static uint32_t rail_round(const struct rail *rail, double value)
{
    if (!(value > (double)rail->from)) return rail->from;
    if (value >= (double)rail->to) return rail->to;
    const double steps = floor((value - (double)rail->from) / (double)rail->step + 0.5);
    const uint32_t on_grid = rail->from + (uint32_t)steps * rail->step;
    return on_grid > rail->to ? rail->to : on_grid;
}

static double share_at(const struct solver *solver, double value)
{
    const struct settings_space *space = &solver->bench->space;
    const double other = (double)solver->rail.other;
    return space->knob == KNOB_CURRENT ? settings_share(space, other, value)
                                       : settings_share(space, value, other);
}

static struct contraction contraction_of(const struct attempt_bench *bench,
                                         const struct solve_request *request,
                                         const struct solve_settings *settings)
{
    struct contraction one = request->frame;
    const bool current = bench->space.knob == KNOB_CURRENT;
    one.duration_us = current ? (double)settings->other : (double)settings->from;
    one.current_ma = (current ? (double)settings->from : (double)settings->other) / 1000.0;
    one.trim_duration_us = (double)NAN;
    one.trim_current_ma = (double)NAN;
    if (settings->from != settings->to) {
        if (current)
            one.trim_current_ma = (double)settings->to / 1000.0;
        else
            one.trim_duration_us = (double)settings->to;
    }
    one.repeat = 1;
    return one;
}

enum status solve_at(struct attempt_bench *bench, const struct solve_request *request,
                     const struct solve_settings *settings, struct solve_result *result, struct message *why)
{
    result->settings = *settings;
    result->contraction = contraction_of(bench, request, settings);
    result->spent = result->floor = false;
    enum status status = attempt_compile(bench, &result->contraction, false, why);
    if (status == STATUS_OK)
        status = attempt_run(bench, &result->contraction, request->before, request->start_ms,
                             &result->attempt, why);
    return status;
}

struct solve_settings solve_strongest(const struct attempt_bench *bench)
{
    const struct settings_space *space = &bench->space;
    if (space->knob == KNOB_CURRENT) {
        const uint32_t to = settings_current_to(space, space->duration_from_us, NULL);
        return (struct solve_settings){to, to, space->duration_from_us};
    }
    const uint32_t to = settings_duration_to(space, space->strongest_ua, NULL);
    return (struct solve_settings){to, to, space->strongest_ua};
}

/* One attempt at (from, to) on the rail, remembered. */
static enum status try_at(struct solver *solver, uint32_t from, uint32_t to, struct attempt_result *attempt)
{
    struct memory *memory = &solver->memory;
    for (size_t i = 0; i < memory->used; i++)
        if (memory->entry[i].from == from && memory->entry[i].to == to) {
            *attempt = memory->entry[i].attempt;
            return STATUS_OK;
        }
    const struct solve_settings settings = {from, to, solver->rail.other};
    const enum status status =
        solve_at(solver->bench, solver->request, &settings, &solver->stands, solver->why);
    if (status != STATUS_OK) return status;
    *attempt = solver->stands.attempt;
    if (memory->used < MEMORY) {
        memory->entry[memory->used].from = from;
        memory->entry[memory->used].to = to;
        memory->entry[memory->used++].attempt = *attempt;
    }
    return STATUS_OK;
}

/* Rise or fall across the hold, signed (the measure's droop is either way). */
static double slope_percent(const struct hold_measures *hold)
{
    return 100.0 * (hold->last_quarter_n - hold->first_quarter_n) / hold->mean_n;
}

/* Distance from what is wanted: the mean's from the target; quarters that are not level weigh the same, per
 * percent; those that break the demand weigh ten times that. */
static double badness(const struct solver *solver, double mean_n, double droop_percent)
{
    const struct contraction_aim *aim = solver->request->aim;
    const double droop = fabs(droop_percent), level = fmin(level_percent, 0.4 * aim->droop_percent_max);
    return fabs(mean_n - aim->target_n) / aim->target_n + 0.01 * fmax(0.0, droop - level) +
           0.1 * fmax(0.0, droop - 0.95 * aim->droop_percent_max);
}

/* Of two attempts as near, the one that meets the demand. */
static double badness_of(const struct solver *solver, const struct attempt_result *attempt)
{
    const double value = badness(solver, attempt->hold.mean_n, slope_percent(&attempt->hold));
    const bool misses = contraction_miss(solver->request->aim, &attempt->hold, 0.002).reason != WHY_NONE;
    return isnan(value) ? (double)INFINITY : value + (misses ? 0.05 : 0.0);
}

/* The best attempt so far; ties to the least charge. */
struct best {
    uint32_t from, to;
    struct attempt_result attempt;
    double badness;
};

static void consider(const struct solver *solver, struct best *best, uint32_t from, uint32_t to,
                     const struct attempt_result *attempt)
{
    const double value = badness_of(solver, attempt);
    const bool tie = value == best->badness && (uint64_t)from + to < (uint64_t)best->from + best->to;
    if (value < best->badness || tie) *best = (struct best){from, to, *attempt, value};
}

/* Where settings stand, in logarithms of what they recruit. */
static struct pair place_of(const struct solver *solver, double from, double to)
{
    const double least = 1e-3, span = to - from;
    const double early = log(fmax(share_at(solver, from + quarter_middle * span), least));
    const double late = log(fmax(share_at(solver, to - quarter_middle * span), least));
    return (struct pair){0.5 * (early + late), late - early};
}

/* What is wrong with an attempt. */
static struct pair error_of(const struct solver *solver, const struct attempt_result *attempt)
{
    const double target = solver->request->aim->target_n, mean = fmax(attempt->hold.mean_n, 0.02 * target);
    const double slope = (attempt->hold.last_quarter_n - attempt->hold.first_quarter_n) / mean;
    return (struct pair){log(mean / target), isnan(slope) ? 0.0 : slope};
}

/* Broyden's update: the slopes that explain the last move, changed as little as can be. */
static void learn(struct solve_slopes *slopes, struct pair moved, struct pair changed)
{
    const double length = moved.level * moved.level + moved.slope * moved.slope;
    if (length < 1e-10) return;
    const double miss_level = changed.level - (slopes->ll * moved.level + slopes->ls * moved.slope);
    const double miss_slope = changed.slope - (slopes->sl * moved.level + slopes->ss * moved.slope);
    struct solve_slopes next = *slopes;
    next.ll += miss_level * moved.level / length;
    next.ls += miss_level * moved.slope / length;
    next.sl += miss_slope * moved.level / length;
    next.ss += miss_slope * moved.slope / length;
    /* force grows with recruitment: a matrix that says otherwise was learned from rounding */
    const bool sane = next.ll > 0.2 && next.ll < 10.0 && next.ss > 0.2 && next.ss < 10.0 &&
                      next.ll * next.ss > 2.0 * fabs(next.ls * next.sl);
    if (sane) *slopes = next;
}

static struct pair step_to(const struct solve_slopes *slopes, struct pair error)
{
    const double whole = slopes->ll * slopes->ss - slopes->ls * slopes->sl;
    const struct pair step = {-(error.level * slopes->ss - error.slope * slopes->ls) / whole,
                              -(error.slope * slopes->ll - error.level * slopes->sl) / whole};
    return (struct pair){fmin(fmax(step.level, -step_most), step_most),
                         fmin(fmax(step.slope, -step_most), step_most)};
}

/* The knob's two ends for a place; real values within the rail. */
static void ends_of(const struct solver *solver, struct pair place, double *from, double *to)
{
    const struct rail *rail = &solver->rail;
    const struct settings_space *space = &solver->bench->space;
    const double low = (double)rail->from, high = (double)rail->to, other = (double)rail->other;
    const double early =
        settings_inverse(space, fmin(exp(place.level - 0.5 * place.slope), 0.9999), other, low, high);
    const double late =
        settings_inverse(space, fmin(exp(place.level + 0.5 * place.slope), 0.9999), other, low, high);
    const double slope = (late - early) / (1.0 - 2.0 * quarter_middle);
    *from = early - quarter_middle * slope;
    *to = late + quarter_middle * slope;
}

static enum status iterate(struct solver *solver, double from, double to, struct best *best)
{
    const struct rail *rail = &solver->rail;
    struct pair was = {0.0, 0.0}, was_error = {0.0, 0.0};
    for (int i = 0; i < ROUNDS; i++) {
        const uint32_t at_from = rail_round(rail, from), at_to = rail_round(rail, to);
        const struct pair here = place_of(solver, (double)at_from, (double)at_to);
        if (i > 0 && here.level == was.level && here.slope == was.slope) break;
        struct attempt_result attempt;
        const enum status status = try_at(solver, at_from, at_to, &attempt);
        if (status != STATUS_OK) return status;
        consider(solver, best, at_from, at_to, &attempt);
        const struct pair error = error_of(solver, &attempt);
        if (i > 0)
            learn(&solver->slopes, (struct pair){here.level - was.level, here.slope - was.slope},
                  (struct pair){error.level - was_error.level, error.slope - was_error.slope});
        was = here;
        was_error = error;
        const struct pair step = step_to(&solver->slopes, error);
        ends_of(solver, (struct pair){here.level + step.level, here.slope + step.slope}, &from, &to);
    }
    return STATUS_OK;
}

enum status solve_step(struct attempt_bench *bench, const struct solve_request *request,
                       const struct solve_settings *settings, struct solve_result *result,
                       struct message *why)
{
    struct solver solver = {.bench = bench, .request = request, .slopes = request->slopes, .why = why};
    solver.rail = rail_at(bench, settings->other);
    enum status status = solve_at(bench, request, settings, result, why);
    if (status != STATUS_OK || bench->space.knob == KNOB_NONE) return status;
    const struct pair here = place_of(&solver, (double)settings->from, (double)settings->to);
    const struct pair step = step_to(&solver.slopes, error_of(&solver, &result->attempt));
    double from, to;
    ends_of(&solver, (struct pair){here.level + step.level, here.slope + step.slope}, &from, &to);
    const struct solve_settings moved = {rail_round(&solver.rail, from), rail_round(&solver.rail, to),
                                         settings->other};
    if (moved.from == settings->from && moved.to == settings->to) return status;
    return solve_at(bench, request, &moved, result, why);
}

/* What the slopes promise of a neighbour of the best. */
static double promise_of(const struct solver *solver, const struct best *best, uint32_t from, uint32_t to)
{
    const struct pair here = place_of(solver, (double)best->from, (double)best->to);
    const struct pair there = place_of(solver, (double)from, (double)to);
    const struct pair moved = {there.level - here.level, there.slope - here.slope},
                      error = error_of(solver, &best->attempt);
    const struct solve_slopes *slopes = &solver->slopes;
    const double level = error.level + slopes->ll * moved.level + slopes->ls * moved.slope;
    const double slope = error.slope + slopes->sl * moved.level + slopes->ss * moved.slope;
    return badness(solver, solver->request->aim->target_n * exp(level), 100.0 * slope);
}

/* Neighbours on the grid, the most promising first; until it is no better. */
static enum status polish(struct solver *solver, struct best *best)
{
    const struct rail *rail = &solver->rail;
    for (int round = 0; round < POLISH_ROUNDS; round++) {
        double promise = best->badness - 1e-4;
        uint32_t from = best->from, to = best->to;
        for (int i = -2; i <= 2; i++)
            for (int j = -2; j <= 2; j++) {
                const uint32_t near_from = rail_round(rail, (double)best->from + i * (double)rail->step);
                const uint32_t near_to = rail_round(rail, (double)best->to + j * (double)rail->step);
                const double guess = promise_of(solver, best, near_from, near_to);
                if (guess >= promise || (near_from == best->from && near_to == best->to)) continue;
                promise = guess;
                from = near_from;
                to = near_to;
            }
        if (from == best->from && to == best->to) break;
        const double before = best->badness;
        struct attempt_result attempt;
        const enum status status = try_at(solver, from, to, &attempt);
        if (status != STATUS_OK) return status;
        consider(solver, best, from, to, &attempt);
        if (!(best->badness < before)) break;
    }
    return STATUS_OK;
}

/* Does the hold keep all but its mean? */
static bool is_sound(const struct solver *solver, const struct attempt_result *attempt)
{
    struct contraction_aim aim = *solver->request->aim;
    aim.tolerance_percent = 100.0;
    return contraction_miss(&aim, &attempt->hold, 0.01).reason == WHY_NONE;
}

/* Settings end at the rail's top: that end stays there, the free end rises from level as far as the target
 * and a sound hold allow. */
static enum status spend(struct solver *solver, struct best *best)
{
    const struct rail *rail = &solver->rail;
    const double target_n = solver->request->aim->target_n;
    const bool late_ends = best->to >= best->from; /* the end of the hold is the one at the top */
    uint32_t low = late_ends ? best->from : best->to, high = rail->to;
    bool best_sound = is_sound(solver, &best->attempt);
    while (low < high) {
        const uint32_t at = low + ((high - low) / rail->step + 1) / 2 * rail->step;
        struct attempt_result attempt;
        const enum status status =
            late_ends ? try_at(solver, at, rail->to, &attempt) : try_at(solver, rail->to, at, &attempt);
        if (status != STATUS_OK) return status;
        const bool sound = is_sound(solver, &attempt), below = attempt.hold.mean_n <= target_n;
        const double off = fabs(attempt.hold.mean_n - target_n) / target_n;
        const double best_off = fabs(best->attempt.hold.mean_n - target_n) / target_n;
        if (sound && (!best_sound || off < best_off)) {
            *best = (struct best){late_ends ? at : rail->to, late_ends ? rail->to : at, attempt, off};
            best_sound = true;
        }
        if (sound && below)
            low = at;
        else
            high = at - rail->step;
    }
    return STATUS_OK;
}

/* Solves on one rail, up to where it ends. */
static enum status solve_rail(struct solver *solver, double guess_from, double guess_to, struct best *best)
{
    solver->memory.used = 0;
    const struct solve_request *request = solver->request;
    if (request->known && request->guess.other == solver->rail.other) {
        solver->memory.entry[0].from = request->guess.from;
        solver->memory.entry[0].to = request->guess.to;
        solver->memory.entry[0].attempt = *request->known;
        solver->memory.used = 1;
    }
    *best = (struct best){.from = solver->rail.from, .to = solver->rail.from, .badness = (double)INFINITY};
    enum status status = iterate(solver, guess_from, guess_to, best);
    if (status == STATUS_OK && best->badness < (double)INFINITY) status = polish(solver, best);
    return status;
}

/* An end of the settings stands at the top of the rail and the hold is short of what is wanted: the range is
 * spent. */
static bool rail_spent(const struct solver *solver, const struct best *best)
{
    const struct contraction_aim *aim = solver->request->aim;
    const bool at_top = best->from == solver->rail.to || best->to == solver->rail.to;
    const bool level =
        fabs(best->attempt.hold.droop_percent) <= fmin(level_percent, 0.4 * aim->droop_percent_max);
    return at_top && (best->attempt.hold.mean_n < aim->target_n * (1.0 - 1e-3) || !level);
}

/* Where to begin on a rail: the guess carried over in recruitment, else a share of what the rail can reach.
 */
static void guess_on(const struct solver *solver, const struct solve_settings *guess, double *from,
                     double *to)
{
    const struct settings_space *space = &solver->bench->space;
    const struct rail *rail = &solver->rail;
    if (!guess) {
        *from = *to = settings_inverse(space, 0.5 * share_at(solver, (double)rail->to), (double)rail->other,
                                       (double)rail->from, (double)rail->to);
        return;
    }
    *from = (double)guess->from;
    *to = (double)guess->to;
    if (guess->other == rail->other || space->knob != KNOB_DURATION) return;
    const double share_from = settings_share(space, *from, (double)guess->other);
    const double share_to = settings_share(space, *to, (double)guess->other);
    *from = settings_inverse(space, share_from, (double)rail->other, (double)rail->from, (double)rail->to);
    *to = settings_inverse(space, share_to, (double)rail->other, (double)rail->from, (double)rail->to);
}

static enum status finish(struct solver *solver, const struct best *best, struct solve_result *result)
{
    const struct contraction_aim *aim = solver->request->aim;
    const struct solve_settings settings = {best->from, best->to, solver->rail.other};
    const struct solve_settings *stood = &solver->stands.settings;
    const bool stands = solver->stands.contraction.repeat > 0 && stood->from == settings.from &&
                        stood->to == settings.to && stood->other == settings.other;
    enum status status = STATUS_OK;
    if (stands)
        *result = solver->stands;
    else
        status = solve_at(solver->bench, solver->request, &settings, result, solver->why);
    if (status != STATUS_OK) return status;
    const bool top = best->from == solver->rail.to || best->to == solver->rail.to;
    const bool bottom = best->from == solver->rail.from || best->to == solver->rail.from;
    const double near = solve_keep_share * aim->tolerance_percent / 100.0;
    result->spent = top && result->attempt.hold.mean_n < aim->target_n * (1.0 - near);
    result->floor = bottom && result->attempt.hold.mean_n > aim->target_n * (1.0 + near);
    result->slopes = solver->slopes;
    return STATUS_OK;
}

/* The share that the spent end would need. */
static double share_needed(const struct solver *solver, const struct best *best)
{
    const double quarter = fmin(best->attempt.hold.first_quarter_n, best->attempt.hold.last_quarter_n);
    const double top = share_at(solver, (double)solver->rail.to);
    return quarter > 0.0 ? top * fmax(solver->request->aim->target_n / quarter, 1.001) : 1.0;
}

/* The first block's current: solved at the strongest current, which covers most, then at the one the rule
 * names. A later block keeps the current it has until its range is spent. */
enum status solve_settings(struct attempt_bench *bench, const struct solve_request *request,
                           struct solve_result *result, struct message *why)
{
    struct solver solver = {.bench = bench, .request = request, .why = why};
    solver.slopes =
        request->has_guess ? request->slopes : (struct solve_slopes){first_gain, 0.0, 0.0, first_gain};
    const struct settings_space *space = &bench->space;
    const struct solve_settings *guess = request->has_guess ? &request->guess : NULL;
    uint32_t other = space->knob == KNOB_CURRENT ? space->duration_from_us : space->strongest_ua;
    if (guess && space->steps_current && settings_duration_to(space, guess->other, NULL) > 0)
        other = guess->other;
    solver.rail = rail_at(bench, other);
    double from, to;
    guess_on(&solver, guess, &from, &to);
    struct best best;
    enum status status = solve_rail(&solver, from, to, &best);
    for (int i = 0; i < CURRENT_TRIES && status == STATUS_OK && space->steps_current; i++) {
        const double share_from = share_at(&solver, (double)best.from),
                     share_to = share_at(&solver, (double)best.to);
        const bool short_of = rail_spent(&solver, &best) && solver.rail.other != space->strongest_ua;
        if (!short_of && (guess || i > 0)) break;
        const double need = short_of ? share_needed(&solver, &best) : fmax(share_from, share_to);
        const uint32_t current = settings_current_for(space, fmin(share_from, share_to), need);
        if (current == solver.rail.other) break;
        const struct solve_settings carry = {best.from, best.to, solver.rail.other};
        solver.rail = rail_at(bench, current);
        guess_on(&solver, &carry, &from, &to);
        status = solve_rail(&solver, from, to, &best);
    }
    if (status == STATUS_OK && rail_spent(&solver, &best) && solver.rail.from < solver.rail.to)
        status = spend(&solver, &best);
    if (status != STATUS_OK) return status;
    return finish(&solver, &best, result);
}
