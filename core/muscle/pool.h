/* Pool: how the tiers of motor units differ. Shares, time factors and fatigue factors in order of
 * recruitment. */
#ifndef PULSEWRIGHT_CORE_MUSCLE_POOL_H
#define PULSEWRIGHT_CORE_MUSCLE_POOL_H
#include "core/muscle/parameters.h"
#include "core/status/status.h"

struct pool {
    unsigned tiers;
    double share[MUSCLE_TIERS_MAX];   /* of the force; sum 1 */
    double slower[MUSCLE_TIERS_MAX];  /* theta: multiplies tau_c, divides the right side of dF/dt;
                                         share-weighted mean 1 */
    double fatigue[MUSCLE_TIERS_MAX]; /* f: multiplies every alpha and beta_A; share-weighted mean 1 */
};

/* Without a pool the tiers are alike. STATUS_REFUSED where tiers or ranges can not be used. */
enum status pool_make(const struct muscle_parameters *parameters, struct pool *pool, struct message *why);
/* w'_k = clamp((rho - sum of the shares before k)/s_k, 0, 1). */
void pool_recruit(const struct pool *pool, double rho, double weight[MUSCLE_TIERS_MAX]);

#endif
