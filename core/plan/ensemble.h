/* Ensemble: muscles drawn from a profile's uncertainty. Draws are low-discrepancy with a stated seed, so the
 * answer repeats. */
#ifndef PULSEWRIGHT_CORE_PLAN_ENSEMBLE_H
#define PULSEWRIGHT_CORE_PLAN_ENSEMBLE_H
#include "core/document/profile.h"

enum { ENSEMBLE_DRAWS_MAX = 4096, ENSEMBLE_DRAWS = 64 };

/* Does the profile say how sure it is? */
bool ensemble_known(const struct profile_muscle *muscle);
/* Fills `draws` parameter sets (log-normal about the profile's values; the full covariance where there is
 * one, else each relative s.d. by itself). STATUS_REFUSED where the covariance is not positive or a key is
 * none of a muscle's. */
enum status ensemble_draw(const struct profile_muscle *muscle, unsigned draws, uint64_t seed,
                          struct muscle_parameters *to, struct message *why);
/* The value below which a share of the n values lies (linear between order statistics); sorts them. NAN where
 * n is 0. */
double ensemble_quantile(double *values, size_t n, double share);

#endif
