/* Muscles that tests share. The goal of this code: one place for the published numbers, each with where it is
 * from. */
#include "support/muscles.h"

#include <math.h>

struct muscle_parameters muscle_untiring(void)
{
    const double absent = (double)NAN;
    /* Ding 2003: A 3.009 (memory), Km 0.103, tau1 50.957 (second-hand), tau_c 20, R0 = Km + 1.04 (read, Kesar
     * 2008), tau2 60 (memory) */
    return (struct muscle_parameters){.A_rest_n_per_ms = 3.009,
                                      .Km_rest = 0.103,
                                      .R0 = 1.143,
                                      .R0_above_Km = absent,
                                      .tau1_rest_ms = 50.957,
                                      .tau2_ms = 60,
                                      .tau_c_ms = 20,
                                      .has_force = true,
                                      .tau_fat_ms = 1e5,
                                      .recruitment = {.law = RECRUITMENT_FULL},
                                      .length_factor = 1,
                                      .length_relative = absent,
                                      .length_reference_mm = absent,
                                      .slope_Km = absent,
                                      .slope_tau1 = absent,
                                      .slope_tau_c = absent,
                                      .tiers = 1};
}

struct muscle_parameters muscle_published(void)
{
    struct muscle_parameters p = muscle_untiring();
    /* alpha_A, alpha_tau1, tau_fat second-hand (Electron. Med. 2023 table 2); alpha_Km memory */
    p.has_fatigue = true;
    p.alpha_A_per_ms2 = -4.0e-7;
    p.alpha_Km_per_ms_n = 1.9e-8;
    p.alpha_tau1_per_n = 2.1e-5;
    p.tau_fat_ms = 127000;
    return p;
}

struct muscle_parameters muscle_composed(void)
{
    struct muscle_parameters p = muscle_published();
    p.beta_A_per_pulse = 4e-4;
    p.recruitment = (struct recruitment){
        .law = RECRUITMENT_STRENGTH_DURATION, .rheobase_ma = 22, .chronaxie_us = 180, .spread = 0.25};
    p.has_potentiation = true;
    p.potentiation_gain = 2.5;
    p.potentiation_rise_ms = 800;
    p.potentiation_decay_ms = 300000;
    p.has_pool = true;
    p.pool_order = POOL_SIZE;
    p.force_range = 50;
    p.speed_range = 3;
    p.fatigue_range = 10;
    p.tiers = 8;
    return p;
}
