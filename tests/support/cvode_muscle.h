/* Reference: the model chapter's equations once more, tier by tier, integrated by SUNDIALS CVODE with a
 * restart at every pulse and root-finding at the bounds. Shares no code with core/muscle or core/predict,
 * only the parameters' names. */
#ifndef PULSEWRIGHT_TESTS_SUPPORT_CVODE_MUSCLE_H
#define PULSEWRIGHT_TESTS_SUPPORT_CVODE_MUSCLE_H
#include "core/muscle/parameters.h"
#include "core/train/contraction.h"
#include <stddef.h>

struct cvode_settings {
    double rtol;      /* 1e-10 for a reference */
    double atol;      /* in units of the scaled states */
    int order_max;    /* 0: CVODE's own, 12 */
    bool closed_form; /* C and S in closed form in the right-hand side (as fast as CVODE can be); else they
                         are integrated too */
};

/* Force (no delay, no tone) and capacity at `samples` ascending times. Aborts the test where CVODE fails.
 * `steps` may be NULL. */
void cvode_run(const struct muscle_parameters *p, const struct train_pulse *pulses, size_t count,
               const struct cvode_settings *settings, const double *sample_ms, size_t samples,
               double *force_n, double *capacity, double *potentiation, long *steps);

/* The published model alone (Ding et al. 2000, 2003: C, F, A, Km, tau1; one tier, all recruited), its own
 * right-hand side. */
void cvode_run_published(const struct muscle_parameters *p, const double *pulse_ms, size_t count,
                         const double *sample_ms, size_t samples, double *force_n, double *A);

#endif
