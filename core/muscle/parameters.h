/* What a muscle is, in numbers: the profile's keys with their units, plain data. Equations: muscle.h. */
#ifndef PULSEWRIGHT_CORE_MUSCLE_PARAMETERS_H
#define PULSEWRIGHT_CORE_MUSCLE_PARAMETERS_H
#include <stdbool.h>

enum { MUSCLE_TIERS_MAX = 32 };

enum recruitment_law {
    RECRUITMENT_FULL,                 /* rho = 1 for any pulse */
    RECRUITMENT_STRENGTH_DURATION,    /* Weiss 1901 / Lapicque 1909, thresholds spread log-normally */
    RECRUITMENT_DURATION_EXPONENTIAL, /* Ding et al. 2007, valid at one current only */
};

struct recruitment {
    enum recruitment_law law;
    double rheobase_ma, chronaxie_us, spread; /* strength-duration */
    double pd0_us, pdt_us, current_ma;        /* duration-exponential */
};

enum pool_order { POOL_SIZE, POOL_REVERSED };

/* A value that a profile leaves out is NAN where the comment says so. */
struct muscle_parameters {
    /* force */
    double A_rest_n_per_ms, Km_rest;
    double R0;          /* NAN where R0_above_Km is given */
    double R0_above_Km; /* NAN where R0 is given */
    double tau1_rest_ms, tau2_ms, tau_c_ms;
    bool has_force; /* false in a profile that is only a seed for `fit` */
    /* fatigue; all zero (and tau_fat_ms 1e5) without the block */
    double alpha_A_per_ms2, alpha_Km_per_ms_n, alpha_tau1_per_n, tau_fat_ms, beta_A_per_pulse;
    bool has_fatigue;
    struct recruitment recruitment;
    /* potentiation; without it P = 1 for ever */
    bool has_potentiation;
    double potentiation_gain, potentiation_rise_ms, potentiation_decay_ms;
    /* pool; without it tiers are alike */
    bool has_pool;
    enum pool_order pool_order;
    double force_range, speed_range, fatigue_range;
    /* length: the factor L (exp(-(l-1)^2/0.45) of `relative` where that is what was given) and the slopes of
     * a fit */
    double length_factor;                                          /* NAN where length_relative is given */
    double length_relative;                                        /* NAN where length_factor is given */
    double length_reference_mm, slope_Km, slope_tau1, slope_tau_c; /* NAN where absent */
    double tone_n, delay_ms;
    unsigned tiers;
};

#endif
