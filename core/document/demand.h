/* Demand (`pulsewright-demand-1`, kind: hold): what force is wanted, how steady, how often. */
#ifndef PULSEWRIGHT_CORE_DOCUMENT_DEMAND_H
#define PULSEWRIGHT_CORE_DOCUMENT_DEMAND_H
#include "core/document/document.h"
#include "core/train/contraction.h"

enum demand_target { TARGET_N, TARGET_NM, TARGET_PERCENT };
enum demand_prefer { PREFER_ENDURANCE, PREFER_CHARGE, PREFER_SMOOTHNESS };
enum { VARY_FREQUENCY = 1, VARY_DURATION = 2, VARY_CURRENT = 4 };

struct range {
    double from, to; /* NAN, NAN: absent; equal: fixed */
};

struct demand {
    char muscle[NAME_SIZE];
    char goal[LINE_SIZE]; /* "" where absent */
    enum demand_target target_kind;
    double target;
    double tolerance_percent, ripple_percent_max, droop_percent_max, rise_ms_max, overshoot_percent_max;
    double hold_ms, release_ms, rest_ms, start_ms;
    unsigned contractions, warm_up;
    bool opening[4];                                     /* [1] single, [2] doublet, [3] triplet */
    bool pattern[2];                                     /* [0] singles, [1] doublets */
    bool ramp[3];                                        /* by enum ramp_shape */
    unsigned vary;                                       /* VARY_* bits */
    struct range frequency_pps, duration_us, current_ma; /* what is fixed or bounded */
    enum demand_prefer prefer;
    bool has_stop_if;
    struct {
        double over_percent, under_percent;
        unsigned contractions;
    } stop_if;
};

enum status demand_parse(const struct document_bytes *bytes, struct demand *demand, struct message *why);
enum status demand_load(const char *path, struct demand *demand, struct message *why);
void demand_print(const struct demand *demand, struct text_out *out);
void demand_free(struct demand *demand);

#endif
