/* Search: which policy carries the demand best. A scan over frequency, opening and pattern, coarse to fine,
 * then how fast frequency is stepped; deterministic. */
#ifndef PULSEWRIGHT_CORE_PLAN_SEARCH_H
#define PULSEWRIGHT_CORE_PLAN_SEARCH_H
#include "core/plan/session.h"

struct search_options {
    bool quick; /* only near `near`: verifies what would work */
    struct session_policy near;
    bool (*progress)(void *context, double share, const char *what);
    void *context;
};

struct search_result {
    struct session_policy policy;
    struct session_frequencies frequencies; /* of that policy's pattern and opening */
    struct session_outcome outcome;
    bool any;
};

/* The frequencies that stimulator, demand and limits leave to a pattern and opening; count 0: none, `end`
 * says why. */
struct session_frequencies search_frequencies(const struct demand *demand,
                                              const struct stimulator *stimulator,
                                              const struct dose_limits *limits, bool pairs, unsigned opening);
/* Is outcome a the better one by the demand's preference? */
bool search_better(const struct demand *demand, const struct session_outcome *a,
                   const struct session_outcome *b);
/* STATUS_REFUSED where there is no policy to try, or it was stopped. */
enum status search_policies(struct session_work *work, const struct session_problem *problem,
                            const struct stimulator *stimulator, const struct search_options *options,
                            struct search_result *result, struct message *why);

#endif
