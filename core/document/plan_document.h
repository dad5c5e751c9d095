/* Plan (`pulsewright-plan-1`): whole in itself. What the planner found, recounted from its final pulses. */
#ifndef PULSEWRIGHT_CORE_DOCUMENT_PLAN_DOCUMENT_H
#define PULSEWRIGHT_CORE_DOCUMENT_PLAN_DOCUMENT_H
#include "core/document/demand.h"
#include "core/document/document.h"
#include "core/document/profile.h"
#include "core/document/stimulator.h"
#include "core/dose/ledger.h"
#include "core/train/contraction.h"

/* reason as shown, in the design's fixed list */
#define PLAN_WHY_TABLE(X)                                                                                    \
    X(WHY_NONE, "none")                                                                                      \
    X(WHY_START, "start")                                                                                    \
    X(WHY_RECRUITMENT_SPENT, "recruitment spent")                                                            \
    X(WHY_OVERSHOOT, "overshoot")                                                                            \
    X(WHY_FORCE_CAP, "force cap")                                                                            \
    X(WHY_FREQUENCY_RANGE, "frequency range")                                                                \
    X(WHY_CURRENT_RANGE, "current range")                                                                    \
    X(WHY_GAP, "gap")                                                                                        \
    X(WHY_DUTY, "duty")                                                                                      \
    X(WHY_ON_TIME, "on-time")                                                                                \
    X(WHY_SESSION, "session")                                                                                \
    X(WHY_RIPPLE, "ripple")                                                                                  \
    X(WHY_DROOP, "droop")                                                                                    \
    X(WHY_RISE, "rise")                                                                                      \
    X(WHY_DURATION_RANGE, "duration range")                                                                  \
    X(WHY_COMFORT, "comfort")                                                                                \
    X(WHY_CHARGE_LIMIT, "charge limit")                                                                      \
    X(WHY_SLEW_LIMIT, "slew limit")                                                                          \
    X(WHY_RATE_LIMIT, "rate limit")                                                                          \
    X(WHY_RMS_LIMIT, "r.m.s. limit")                                                                         \
    X(WHY_WARM_UP, "warm-up")

enum plan_why_reason {
#define PLAN_WHY_ENUM(name, text) name,
    PLAN_WHY_TABLE(PLAN_WHY_ENUM)
#undef PLAN_WHY_ENUM
        PLAN_WHY_REASONS
};
const char *plan_why_text(enum plan_why_reason reason);

struct plan_why {
    enum plan_why_reason reason;
    double value, limit;
    char unit[16];
};

/* Recount of a block's contractions: least and greatest where they differ. */
struct plan_recount {
    double mean_n_first, mean_n_last, mean_n_low, mean_n_high; /* low, high: over the block's contractions */
    double peak_n, ripple_percent, droop_percent, rise_ms, overshoot_percent; /* the worst in the block */
    double capacity, remaining_20, remaining_50;                              /* at the block's end */
    double band_5_n,
        band_95_n; /* ensemble of the mean, first contraction of the block; NAN without uncertainty */
};

struct plan_block {
    unsigned first, count;       /* contractions, from 1, warm-ups included */
    struct contraction settings; /* repeat = count; ramps with their pieces */
    struct plan_why why;
    bool warm_up;
    struct plan_recount recount;
};

/* The best length of one ramp shape, as tried on the first scored contraction: the losers beside the winner.
 */
struct plan_ramp_trial {
    enum ramp_shape shape;
    double ms, rise_ms, overshoot_percent,
        outside_n_s; /* outside_n_s: force-time integral outside the hold */
    bool chosen;
};
enum { PLAN_RAMP_TRIALS_MAX = 3, PLAN_NOTES_MAX = 8 };

struct plan_channel {
    unsigned channel;
    char muscle[NAME_SIZE];
    char side[NAME_SIZE];
    double pad_cm2, return_pad_cm2; /* NAN where absent */
    struct recruitment recruitment;
    struct dose_limits limits;              /* the effective ones, written in documents' units */
    const char *limit_source[DOSE_FIGURES]; /* "person" | "stimulator" | "program" */
    double force_cap_n;                     /* NAN: none */
    double force_edge_n; /* recount: greatest upper 95 % edge of the ensemble's peak (without uncertainty the
                            peak itself) */
    double comfort_ma;   /* NAN: none */
    double start_ms;
    /* Several muscles: each channel's own demand and target. In a plan of one channel they equal the plan's.
     */
    struct demand demand;
    double target_n;    /* NAN: none (a compiled train) */
    size_t ramp_trials; /* 0 where none were tried (a compiled train) */
    struct plan_ramp_trial ramp_trial[PLAN_RAMP_TRIALS_MAX];
    size_t blocks; /* 0 where not even one contraction can be given within the limits */
    struct plan_block *block;
};

struct plan {
    char person[NAME_SIZE];
    char goal[LINE_SIZE];
    char program[NAME_SIZE]; /* name and version that made it */
    char profile_digest[2 * DIGEST_SIZE + 1], demand_digest[2 * DIGEST_SIZE + 1],
        stimulator_digest[2 * DIGEST_SIZE + 1];
    struct demand demand;      /* as planned, of the first channel; target resolved below. contractions 0: a
                                  compiled train, no demand */
    double target_n;           /* NAN: none */
    uint32_t common_period_us; /* channels that take turns; 0: none */
    struct stimulator stimulator;
    size_t channels;
    struct plan_channel *channel;
    /* verdict */
    bool feasible;
    unsigned contractions_asked, contractions_met;
    unsigned first_miss; /* contraction number, 0: none */
    struct plan_why first_miss_why, binding;
    char verdict[LINE_SIZE]; /* one line for a person */
    double capacity_end, force_remaining_50_end, charge_total_uc;
    double ensemble_met_share; /* NAN without uncertainty */
    struct ledger ledger;
    struct {
        double largest_target_n, longest_hold_ms; /* NAN where not searched */
        unsigned most_contractions;
    } would_work;
    char as_found[16]; /* found.as of the profile: "single" | "train" | "" */
    size_t notes;      /* lines for a person: an old profile, no uncertainty, ... */
    char note[PLAN_NOTES_MAX][LINE_SIZE];
};

enum status plan_parse(const struct document_bytes *bytes, struct plan *plan, struct message *why);
enum status plan_load(const char *path, struct plan *plan, struct message *why);
void plan_print(const struct plan *plan, struct text_out *out);
void plan_free(struct plan *plan);

#endif
