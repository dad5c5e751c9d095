/* Recruitment: current and phase duration -> the fraction of the pool that a pulse recruits, and back.
 * Three laws: all of it; thresholds spread log-normally about a strength-duration curve (Weiss 1901, Lapicque
 * 1909); exponential in duration at one current (Ding et al. 2007). Pure functions. */
#ifndef PULSEWRIGHT_CORE_MUSCLE_RECRUITMENT_H
#define PULSEWRIGHT_CORE_MUSCLE_RECRUITMENT_H
#include "core/muscle/parameters.h"
#include "core/status/status.h"

/* Below this fraction a pulse recruits nothing. */
#define RECRUITMENT_LEAST 0.001

/* Standard normal distribution function and its inverse (p in 0..1; 0 gives -infinity, 1 gives infinity). */
double normal_cdf(double z);
double normal_inverse(double p);

/* The fraction recruited, 0..1; below RECRUITMENT_LEAST it is 0. A pulse without current or duration recruits
 * nothing. duration-exponential ignores the current here: ask recruitment_takes_current first. */
double recruitment_of(const struct recruitment *recruitment, double duration_us, double current_ma);
/* STATUS_OK, or STATUS_REFUSED with both currents named where the law holds at another current only. */
enum status recruitment_takes_current(const struct recruitment *recruitment, double current_ma,
                                      struct message *why);
/* The duration that recruits rho at this current, in us. NAN where no duration does (rho beyond what the
 * current reaches, law full). */
double recruitment_duration_us(const struct recruitment *recruitment, double rho, double current_ma);
/* The current that recruits rho at this duration, in mA. NAN where none does or the law does not depend on
 * it. */
double recruitment_current_ma(const struct recruitment *recruitment, double rho, double duration_us);

#endif
