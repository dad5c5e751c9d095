/* Draws. The goal of this code: the corners of the parameter range are met as often as its middle. */
#include "support/draws.h"

#include "support/muscles.h"

#include <math.h>

uint64_t draw_next(uint64_t *state)
{
    uint64_t z = (*state += 0x9e3779b97f4a7c15u);
    z = (z ^ (z >> 30)) * 0xbf58476d1ce4e5b9u;
    z = (z ^ (z >> 27)) * 0x94d049bb133111ebu;
    return z ^ (z >> 31);
}

double draw_uniform(uint64_t *state, double from, double to)
{
    return from + (to - from) * ((double)(draw_next(state) >> 11) * 0x1p-53);
}

double draw_log(uint64_t *state, double from, double to)
{
    return from * pow(to / from, draw_uniform(state, 0, 1));
}

/* Both ends now and then, else between them. */
static double draw_ends(uint64_t *state, double from, double to)
{
    const uint64_t which = draw_next(state) % 8;
    return which == 0 ? from : which == 1 ? to : draw_log(state, from, to);
}

struct muscle_parameters draw_muscle(uint64_t *state)
{
    struct muscle_parameters p = muscle_published();
    p.A_rest_n_per_ms = draw_ends(state, 0.1, 20);
    p.Km_rest = draw_ends(state, 0.01, 0.5);
    p.R0 = draw_ends(state, 0.5, 10);
    if (draw_next(state) % 3 == 0) {
        p.R0_above_Km = draw_uniform(state, 0.5, 2);
        p.R0 = (double)NAN;
    }
    p.tau1_rest_ms = draw_ends(state, 2, 250);
    p.tau2_ms = draw_next(state) % 6 == 0 ? 0 : draw_uniform(state, 0, 500);
    p.tau_c_ms = draw_ends(state, 2, 45);
    p.tau_fat_ms = draw_ends(state, 20000, 400000);
    const double tiring = draw_next(state) % 5 == 0 ? 0 : draw_ends(state, 0.1, 10);
    p.alpha_A_per_ms2 *= tiring;
    p.alpha_Km_per_ms_n *= tiring;
    p.alpha_tau1_per_n *= tiring;
    p.beta_A_per_pulse = draw_next(state) % 2 ? 4e-4 * tiring : 0;
    p.recruitment = (struct recruitment){.law = RECRUITMENT_STRENGTH_DURATION,
                                         .rheobase_ma = draw_uniform(state, 10, 30),
                                         .chronaxie_us = draw_uniform(state, 100, 600),
                                         .spread = draw_uniform(state, 0.1, 0.5)};
    p.has_potentiation = draw_next(state) % 2;
    p.potentiation_gain = draw_uniform(state, 0, 6);
    p.potentiation_rise_ms = draw_log(state, 100, 5000);
    p.potentiation_decay_ms = draw_log(state, 20000, 600000);
    p.tiers = (unsigned)(1 + draw_next(state) % 12);
    p.has_pool = p.tiers > 1 && draw_next(state) % 2;
    p.pool_order = draw_next(state) % 2 ? POOL_SIZE : POOL_REVERSED;
    p.force_range = draw_log(state, 1, 100);
    p.speed_range = draw_log(state, 1, 4);
    p.fatigue_range = draw_log(state, 1, 20);
    p.length_factor = draw_uniform(state, 0.4, 1);
    return p;
}

size_t draw_pulses(uint64_t *state, double tau1_ms, struct train_pulse pulses[DRAW_PULSES_MAX])
{
    const size_t count = 8 + draw_next(state) % (DRAW_PULSES_MAX - 8);
    double now = draw_next(state) % 2 ? draw_uniform(state, 0, 50) : 0;
    const double typical = draw_log(state, 8, 200), duration = draw_uniform(state, 150, 500),
                 current = draw_uniform(state, 25, 80);
    for (size_t i = 0; i < count; i++) {
        const uint64_t kind = draw_next(state) % 16;
        pulses[i] = (struct train_pulse){.time_ms = now, .duration_us = duration, .current_ma = current};
        if (kind < 6) pulses[i].duration_us = draw_uniform(state, 50, 600);
        now += kind == 7                                  ? draw_log(state, 2, 8)
               : kind == 8                                ? draw_log(state, 300, tau1_ms < 10 ? 1000 : 5000)
               : kind == 9                                ? draw_log(state, 2, 300)
               : kind == 10 && i % 8 == 0 && tau1_ms > 25 ? draw_log(state, 5000, 60000)
                                                          : typical;
    }
    return count;
}
