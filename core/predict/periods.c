/* Force over periods. The goal of this code: extremes and means of the force itself, not of samples of it, so
 * that ripple does not depend on a sampling step. Method: cubic Hermite through both ends of an engine's
 * step. */
#include "core/predict/periods.h"

#include <math.h>

struct gather gather_empty(void)
{
    return (struct gather){
        .least = (double)INFINITY, .greatest = -(double)INFINITY, .greatest_at_ms = (double)NAN};
}

static void see(struct gather *gather, double force, double at_ms)
{
    if (force < gather->least) gather->least = force;
    if (force > gather->greatest) {
        gather->greatest = force;
        gather->greatest_at_ms = at_ms;
    }
}

void gather_add(struct gather *gather, const struct gather *more)
{
    gather->integral += more->integral;
    if (more->least < gather->least) gather->least = more->least;
    if (more->greatest > gather->greatest) {
        gather->greatest = more->greatest;
        gather->greatest_at_ms = more->greatest_at_ms;
    }
}

/* Extremes of the cubic with values f0, f1 and slopes d0, d1 over h, inside it: zeros of its derivative. */
static void see_inside(struct gather *gather, double f0, double f1, double d0, double d1, double h,
                       double at_ms)
{
    const double rise = (f1 - f0) / h;
    const double a = 3 * (d0 + d1 - 2 * rise), b = 2 * (3 * rise - 2 * d0 - d1),
                 c = d0; /* a s^2 + b s + c, s = 0..1 */
    const double under = b * b - 4 * a * c;
    if (under < 0) return;
    const double q = -0.5 * (b + copysign(sqrt(under), b));
    const double zero[2] = {a != 0 ? q / a : (double)NAN, q != 0 ? c / q : (double)NAN};
    for (int i = 0; i < 2; i++) {
        const double s = zero[i];
        if (!(s > 0 && s < 1)) continue;
        const double force = f0 + h * s * (d0 + s * (b / 2 + s * a / 3));
        see(gather, force, at_ms + s * h);
    }
}

void gather_advance(struct gather *gather, struct engine *engine, double to_ms)
{
    double f0 = engine_force_n(engine), d0 = engine_force_slope(engine);
    see(gather, f0, engine->time_ms);
    while (engine->time_ms < to_ms) {
        const double at_ms = engine->time_ms;
        engine_step(engine, to_ms);
        const double h = engine->time_ms - at_ms, f1 = engine_force_n(engine),
                     d1 = engine_force_slope(engine);
        gather->integral += 0.5 * h * (f0 + f1) + h * h / 12 * (d0 - d1);
        see_inside(gather, f0, f1, d0, d1, h, at_ms);
        see(gather, f1, engine->time_ms);
        f0 = f1;
        d0 = d1;
    }
}
