/* Lanes: the muscle's equations between pulses on eight doubles at once (GNU vectors). The one statement of
 * the right-hand side. Included by code that is compiled for several instruction sets, so everything is
 * inlined and passed by pointer. */
#ifndef PULSEWRIGHT_CORE_MUSCLE_LANES_H
#define PULSEWRIGHT_CORE_MUSCLE_LANES_H
#include "core/muscle/muscle.h"

#include <math.h> /* also says whether this is glibc, whose loader chooses between clones */

/* may_alias: rows of plain arrays are read and written as vectors */
typedef double lanes_t __attribute__((vector_size(64), may_alias));
typedef long long lanes_mask_t __attribute__((vector_size(64)));
_Static_assert(sizeof(lanes_t) == LANE_WIDTH * sizeof(double), "a vector is a row of lanes");
#define LANES_INLINE static inline __attribute__((always_inline))

/* One version an instruction set, chosen as the program starts. Not under the sanitizers, which run later
 * than that choice. */
#if defined(__x86_64__) && defined(__GLIBC__) && !defined(__SANITIZE_ADDRESS__) && !defined(__clang__)
#define LANES_CLONES __attribute__((target_clones("avx512f", "avx2", "default")))
#else
#define LANES_CLONES
#endif

LANES_INLINE void lanes_greater(lanes_t *out, const lanes_t *a, const lanes_t *b)
{
    const lanes_mask_t mask = *a > *b;
    *out = (lanes_t)((mask & (lanes_mask_t)*a) | (~mask & (lanes_mask_t)*b));
}
LANES_INLINE void lanes_lesser(lanes_t *out, const lanes_t *a, const lanes_t *b)
{
    const lanes_mask_t mask = *a < *b;
    *out = (lanes_t)((mask & (lanes_mask_t)*a) | (~mask & (lanes_mask_t)*b));
}
/* out = mask ? a : b */
LANES_INLINE void lanes_select(lanes_t *out, const lanes_mask_t *mask, const lanes_t *a, const lanes_t *b)
{
    *out = (lanes_t)((*mask & (lanes_mask_t)*a) | (~*mask & (lanes_mask_t)*b));
}
LANES_INLINE double lanes_greatest(const lanes_t *a)
{
    double greatest = (*a)[0];
    for (int i = 1; i < LANE_WIDTH; i++)
        if (!((*a)[i] <= greatest)) greatest = (*a)[i];
    return greatest;
}
LANES_INLINE void lanes_magnitude(lanes_t *out, const lanes_t *a)
{
    *out = (lanes_t)((lanes_mask_t)*a & 0x7fffffffffffffffLL);
}

/* e^x for x <= 0 (0 below -700), to 3e-16: x = n ln 2 + r, |r| <= 0.35, Taylor to r^13, n put into the
 * exponent. */
LANES_INLINE void lanes_exp(lanes_t *out, const lanes_t *argument)
{
    const lanes_t least = {-700, -700, -700, -700, -700, -700, -700, -700};
    const double round_shift =
        6755399441055744.0; /* 1.5 * 2^52: adding it rounds to an integer in the low bits */
    lanes_t x;
    lanes_greater(&x, argument, &least);
    const lanes_t shifted = x * 1.4426950408889634074 + round_shift;
    const lanes_t n = shifted - round_shift;
    const lanes_t r = (x - n * 0.693147180369123816490) - n * 1.90821492927058770002e-10;
    lanes_t p = r * (1.0 / 6227020800.0) + 1.0 / 479001600.0;
    p = p * r + 1.0 / 39916800.0;
    p = p * r + 1.0 / 3628800.0;
    p = p * r + 1.0 / 362880.0;
    p = p * r + 1.0 / 40320.0;
    p = p * r + 1.0 / 5040.0;
    p = p * r + 1.0 / 720.0;
    p = p * r + 1.0 / 120.0;
    p = p * r + 1.0 / 24.0;
    p = p * r + 1.0 / 6.0;
    p = p * r + 0.5;
    p = p * r + 1.0;
    p = p * r + 1.0;
    *out = (lanes_t)((lanes_mask_t)p + ((lanes_mask_t)shifted << 52));
}

/* What is integrated, in this order. */
enum lane_variable { LANE_PHI, LANE_A, LANE_KM, LANE_TAU1, LANE_P, LANE_VARIABLES };

/* Constants of one row of lanes for a step. */
struct lanes_constants {
    lanes_t slower_inverse, alpha_A, alpha_Km, alpha_tau1; /* alphas with the pool's fatigue factor */
    lanes_t dA_least, dtau1_most;
    double A_rest, Km_rest, tau1_rest, tau2, fatigue_rate, gain, rise_rate, decay_rate;
};

/* dy/dt of one row (LANE_P only where it potentiates; without, P is 1 for ever): y as enum lane_variable, C
 * the activation now, drive = w L. One division: with D = K' + C and E = tau1 D + tau2 C it is x = C/D = C
 * E/(D E) and 1/(tau1 + tau2 x) = D/E = D D/(D E). */
LANES_INLINE void lanes_derive(lanes_t dy[LANE_VARIABLES], const lanes_t y[LANE_VARIABLES], const lanes_t *C,
                               const lanes_t *drive, const struct lanes_constants *constants,
                               bool potentiates)
{
    lanes_t D = y[LANE_KM] + *C;
    if (potentiates) D = y[LANE_KM] * (1 + constants->gain * (1 - y[LANE_P])) + *C;
    const lanes_t E = y[LANE_TAU1] * D + constants->tau2 * *C;
    const lanes_t inverse = 1 / (D * E);
    const lanes_t x = *C * E * inverse;
    dy[LANE_PHI] = (*drive * y[LANE_A] * x - y[LANE_PHI] * (D * D * inverse)) * constants->slower_inverse;
    const lanes_t dA =
        (constants->A_rest - y[LANE_A]) * constants->fatigue_rate + constants->alpha_A * y[LANE_PHI];
    lanes_greater(&dy[LANE_A], &dA, &constants->dA_least);
    dy[LANE_KM] =
        (constants->Km_rest - y[LANE_KM]) * constants->fatigue_rate + constants->alpha_Km * y[LANE_PHI];
    const lanes_t dtau1 =
        (constants->tau1_rest - y[LANE_TAU1]) * constants->fatigue_rate + constants->alpha_tau1 * y[LANE_PHI];
    lanes_lesser(&dy[LANE_TAU1], &dtau1, &constants->dtau1_most);
    if (potentiates)
        dy[LANE_P] = x * (1 - y[LANE_P]) * constants->rise_rate - y[LANE_P] * constants->decay_rate;
}

#endif
