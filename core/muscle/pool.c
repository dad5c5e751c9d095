/* Tiers in order of recruitment. The goal of this code: the profile's numbers stay those of the whole muscle
 * however its units differ. Source of the shape: motor unit forces spread exponentially over the pool
 * (Fuglevand et al. 1993, who use a 100-fold range of force and a threefold one of contraction time);
 * force_range 50 is common practice, no source. */
#include "core/muscle/pool.h"

#include <math.h>
#include <string.h>

/* A smaller part of a tier is the rounding of the shares' sum, not a recruited unit: the tier is not touched.
 */
#define PART_LEAST 1e-12

/* Divides by the share-weighted mean. */
static void normalise(const double *share, double *factor, unsigned tiers)
{
    double mean = 0;
    for (unsigned k = 0; k < tiers; k++) mean += share[k] * factor[k];
    for (unsigned k = 0; k < tiers; k++) factor[k] /= mean;
}

static enum status check_range(double range, const char *name, struct message *why)
{
    if (isfinite(range) && range > 0) return STATUS_OK;
    return status_fail(why, STATUS_REFUSED, "pool: %s holds %g, it may hold a number above 0", name, range);
}

enum status pool_make(const struct muscle_parameters *parameters, struct pool *pool, struct message *why)
{
    const unsigned tiers = parameters->tiers;
    struct pool made;
    memset(&made, 0, sizeof made);
    if (tiers < 1 || tiers > MUSCLE_TIERS_MAX)
        return status_fail(why, STATUS_REFUSED, "tiers holds %u, it may hold 1 to %d", tiers,
                           MUSCLE_TIERS_MAX);
    made.tiers = tiers;
    if (!parameters->has_pool) {
        for (unsigned k = 0; k < tiers; k++) {
            made.share[k] = 1.0 / tiers;
            made.slower[k] = made.fatigue[k] = 1;
        }
        *pool = made;
        return STATUS_OK;
    }
    if (tiers == 1)
        return status_fail(why, STATUS_REFUSED, "tiers holds 1, a pool needs 2 to %d", MUSCLE_TIERS_MAX);
    enum status status = check_range(parameters->force_range, "force_range", why);
    if (status == STATUS_OK) status = check_range(parameters->speed_range, "speed_range", why);
    if (status == STATUS_OK) status = check_range(parameters->fatigue_range, "fatigue_range", why);
    if (status != STATUS_OK) return status;

    double sum = 0;
    for (unsigned k = 0; k < tiers; k++) {
        const unsigned from_smallest = parameters->pool_order == POOL_SIZE ? k : tiers - 1 - k;
        const double q = (double)from_smallest / (tiers - 1);
        made.share[k] = pow(parameters->force_range, q);
        made.slower[k] = pow(parameters->speed_range, 0.5 - q);
        made.fatigue[k] = pow(parameters->fatigue_range, q - 0.5);
        sum += made.share[k];
    }
    for (unsigned k = 0; k < tiers; k++) made.share[k] /= sum;
    normalise(made.share, made.slower, tiers);
    normalise(made.share, made.fatigue, tiers);
    *pool = made;
    return STATUS_OK;
}

void pool_recruit(const struct pool *pool, double rho, double weight[MUSCLE_TIERS_MAX])
{
    double before = 0;
    for (unsigned k = 0; k < pool->tiers; k++) {
        const double part = (rho - before) / pool->share[k];
        weight[k] = part < PART_LEAST ? 0 : part > 1 ? 1 : part;
        before += pool->share[k];
    }
    if (rho >= 1) /* the shares' sum may miss 1 by rounding: a full pulse is full */
        for (unsigned k = 0; k < pool->tiers; k++) weight[k] = 1;
}
