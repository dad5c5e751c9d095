/* Settings: what phase durations and currents a demand, a person and a stimulator leave, and how recruitment
 * becomes settings. Rule (design, Plan): one current a block; duration moves first; the block's current is
 * the least whose full duration range covers what the block needs (`prefer: charge`: the greatest).
 * Everything is an integer on the stimulator's grid: us, uA, pC. */
#ifndef PULSEWRIGHT_CORE_PLAN_SETTINGS_H
#define PULSEWRIGHT_CORE_PLAN_SETTINGS_H
#include "core/plan/plan.h"

/* What moves inside a block. */
enum plan_knob { KNOB_NONE, KNOB_DURATION, KNOB_CURRENT };

struct settings_bound {
    uint32_t value; /* us, uA or pC */
    enum plan_why_reason reason;
};

/* Plain data; made once for a channel, `settings_rate` sets it to a frequency. */
struct settings_space {
    struct recruitment recruitment;
    struct train_grid grid;
    enum plan_knob knob;
    bool steps_current;    /* current may change from block to block (the knob is the duration) */
    bool greatest_current; /* of those that cover: the rule of `prefer: charge` */
    bool choose_current;   /* not varied and not fixed: chosen once, at the first scored contraction */
    bool choose_cover;     /* not varied and not fixed, with a duration that moves: chosen once, for the whole
                              session */
    uint32_t current_from_ua, duration_from_us; /* least allowed, on the grid, above 0 */
    struct settings_bound current_to, duration_to,
        charge_to; /* greatest allowed: the first two on the grid */
    uint64_t rms_ua;
    uint64_t net_dc_na, mismatch_ppm;
    double pulses_per_s;   /* in the busiest second, opening extras included */
    uint32_t strongest_ua; /* the current that recruits most, with its longest duration, at this rate */
};

/* STATUS_REFUSED with why where nothing is left, or the demand varies what the law can not. `whole` (may be
 * NULL) keeps the range of a current that is chosen once. */
enum status settings_space_make(struct settings_space *space, struct settings_space *whole,
                                const struct demand *demand, const struct plan_channel *channel,
                                const struct profile_muscle *muscle, const struct stimulator *stimulator,
                                struct message *why);
/* Sets the rate (pulses in the busiest second); r.m.s. and net direct current then bound the settings. */
void settings_rate(struct settings_space *space, double pulses_per_s);
/* Share of the pool that a pulse recruits, 0..1; any real settings. */
double settings_share(const struct settings_space *space, double duration_us, double current_ua);
/* Longest duration allowed at a current, on the grid; 0: none. `bound` (may be NULL) says what ends it. */
uint32_t settings_duration_to(const struct settings_space *space, uint32_t current_ua,
                              struct plan_why *bound);
/* Greatest current allowed at a duration, on the grid; 0: none. */
uint32_t settings_current_to(const struct settings_space *space, uint32_t duration_us,
                             struct plan_why *bound);
/* The block's current for shares from `least` to `most` by the rule; the strongest where none covers them. */
uint32_t settings_current_for(const struct settings_space *space, double least, double most);
/* One current from here on. */
void settings_fix_current(struct settings_space *space, uint32_t current_ua);
/* Which bound ends recruitment at the strongest settings, with its two numbers (documents' units). */
struct plan_why settings_binding(const struct settings_space *space, uint32_t duration_us,
                                 uint32_t current_ua);
/* Real-valued inverse along the knob, the other fixed: the value (us or uA) between from and to that recruits
 * `share`; clamped. */
double settings_inverse(const struct settings_space *space, double share, double other, double from,
                        double to);

struct plan_why plan_why_make(enum plan_why_reason reason, double value, double limit, const char *unit);

#endif
