/* The three recruitment laws and their inverses. The goal of this code: one place that says what a setting
 * does, exact enough in both directions that a ramp of recruitment comes back from its durations. Sources:
 * strength-duration Weiss 1901, Lapicque 1909, I = b (1 + c/d); the log-normal spread of thresholds is this
 * project's; duration-exponential Ding et al. 2007 (Muscle Nerve). */
#include "core/muscle/recruitment.h"

#include <math.h>

double normal_cdf(double z)
{
    return 0.5 * erfc(-z * 0.70710678118654752440);
}

/* Density of the standard normal. */
static double normal_density(double z)
{
    return 0.39894228040143267794 * exp(-0.5 * z * z);
}

/* Lower half only (p <= 1/2): a tail-shaped start, then Newton steps with Halley's correction on the
 * logarithm of the tail, which is concave and so converges from any start; the fixed point is where
 * normal_cdf gives p back, to rounding. */
static double lower_inverse(double p)
{
    const double t = sqrt(-2 * log(p));
    double z = p > 0.02 ? 2.50662827463100050242 * (p - 0.5) : -(t - log(t * 2.50662827463100050242) / t);
    for (int i = 0; i < 60; i++) {
        const double cdf = normal_cdf(z), density = normal_density(z);
        const double step = log(cdf / p) * cdf / density;
        const double next = z - step;
        if (fabs(next - z) <= 1e-16 * fabs(next)) return next;
        z = next;
    }
    return z;
}

double normal_inverse(double p)
{
    if (isnan(p) || p < 0 || p > 1) return (double)NAN;
    if (p == 0) return -(double)INFINITY;
    if (p == 1) return (double)INFINITY;
    if (p == 0.5) return 0;
    return p < 0.5 ? lower_inverse(p) : -lower_inverse(1 - p);
}

double recruitment_of(const struct recruitment *recruitment, double duration_us, double current_ma)
{
    double rho = 0;
    if (!(duration_us > 0) || !(current_ma > 0)) return 0;
    switch (recruitment->law) {
    case RECRUITMENT_FULL: rho = 1; break;
    case RECRUITMENT_STRENGTH_DURATION: {
        const double threshold_ma = recruitment->rheobase_ma * (1 + recruitment->chronaxie_us / duration_us);
        rho = normal_cdf(log(current_ma / threshold_ma) / recruitment->spread);
        break;
    }
    case RECRUITMENT_DURATION_EXPONENTIAL:
        if (duration_us > recruitment->pd0_us)
            rho = -expm1(-(duration_us - recruitment->pd0_us) / recruitment->pdt_us);
        break;
    }
    return rho < RECRUITMENT_LEAST ? 0 : rho;
}

enum status recruitment_takes_current(const struct recruitment *recruitment, double current_ma,
                                      struct message *why)
{
    if (recruitment->law != RECRUITMENT_DURATION_EXPONENTIAL) return STATUS_OK;
    /* settings come through microamperes: a difference below half of one is none */
    if (fabs(current_ma - recruitment->current_ma) <= 0.0005) return STATUS_OK;
    return status_fail(why, STATUS_REFUSED,
                       "a pulse has %.9g mA, but the muscle's duration-exponential law holds at %.9g mA only",
                       current_ma, recruitment->current_ma);
}

double recruitment_duration_us(const struct recruitment *recruitment, double rho, double current_ma)
{
    if (!(rho > 0) || rho >= 1) return (double)NAN;
    switch (recruitment->law) {
    case RECRUITMENT_FULL: return (double)NAN;
    case RECRUITMENT_STRENGTH_DURATION: {
        const double over =
            current_ma / (recruitment->rheobase_ma * exp(recruitment->spread * normal_inverse(rho))) - 1;
        return over > 0 ? recruitment->chronaxie_us / over : (double)NAN;
    }
    case RECRUITMENT_DURATION_EXPONENTIAL: return recruitment->pd0_us - recruitment->pdt_us * log1p(-rho);
    }
    return (double)NAN;
}

double recruitment_current_ma(const struct recruitment *recruitment, double rho, double duration_us)
{
    if (!(rho > 0) || rho >= 1 || !(duration_us > 0)) return (double)NAN;
    if (recruitment->law != RECRUITMENT_STRENGTH_DURATION) return (double)NAN;
    const double threshold_ma = recruitment->rheobase_ma * (1 + recruitment->chronaxie_us / duration_us);
    return threshold_ma * exp(recruitment->spread * normal_inverse(rho));
}
