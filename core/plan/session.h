/* Session: one policy carried through the whole demand. Settings follow the tiring (or waking) muscle block
 * by block along the iso-force curve; where recruitment is spent a policy that steps raises the frequency.
 * The search compares policies; the best is written down. */
#ifndef PULSEWRIGHT_CORE_PLAN_SESSION_H
#define PULSEWRIGHT_CORE_PLAN_SESSION_H
#include "core/plan/ramp.h"

/* What is chosen before a session and kept through it. */
struct session_policy {
    double frequency_pps; /* of the first contraction */
    unsigned opening;
    bool pairs;
    bool steps;    /* frequency may be raised when recruitment is spent */
    bool thorough; /* every ramp is tried, not the few of a scan */
    double growth; /* least relative rise of frequency at a step; 0: the next the stimulator has */
};

/* Frequencies that are allowed: from + i step, i < count. `end` says what ends them. */
struct session_frequencies {
    double from, step;
    unsigned count;
    struct plan_why end;
};

struct session_contraction {
    struct contraction settings;
    struct hold_measures hold;
    struct plan_why why;  /* why the settings are others than before; WHY_NONE: they are the same */
    struct plan_why miss; /* WHY_NONE: met */
};

/* The problem, as all policies see it. */
struct session_problem {
    const struct demand *demand;
    struct contraction_aim aim; /* what a contraction is held against */
    double solve_target_n;      /* what settings aim at: the target, or less where a force cap asks for it */
    struct settings_space space;
    const struct predictor *rested;
    const struct predictor
        *awake; /* rested too, but potentiated and never tired: how fused a rate can be at best */
    uint64_t start_us;
    unsigned warm_up, contractions; /* in all: warm_up + scored */
    uint32_t common_period_us; /* first pulses stand on this period (several channels in turns); 0: free */
};

struct session_outcome {
    unsigned given;      /* contractions that fit the limits */
    unsigned met;        /* scored ones before the first miss */
    unsigned first_miss; /* 0: none */
    struct plan_why first_miss_why;
    double remaining_50, charge_uc, ripple_percent; /* ripple: the mean of scored contractions */
    double frequency_last_pps;
    struct ramp_choice ramp; /* as tried on the first scored contraction */
};

/* A bench and the predictor that stands between contractions. */
struct session_work {
    struct attempt_bench bench;
    struct predictor *now;
};

/* Runs the policy. `whole`: goes on after the first miss, as far as limits allow; else stops there.
 * `contraction` (problem->contractions entries) may be NULL. */
enum status session_run(struct session_work *work, const struct session_problem *problem,
                        const struct session_policy *policy, const struct session_frequencies *frequencies,
                        bool whole, struct session_contraction *contraction, struct session_outcome *outcome,
                        struct message *why);

/* Same settings to the last step: they can be one block. */
bool session_same_settings(const struct contraction *a, const struct contraction *b);
/* A broken dose figure as a reason, with its numbers in documents' units. */
struct plan_why session_dose_why(const struct dose_verdict *verdict);

#endif
