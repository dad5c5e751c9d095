/* Muscles that tests share, built in C. */
#ifndef PULSEWRIGHT_TESTS_SUPPORT_MUSCLES_H
#define PULSEWRIGHT_TESTS_SUPPORT_MUSCLES_H
#include "core/muscle/parameters.h"

/* Able-bodied quadriceps, Ding et al. 2003 rest values and fatigue (A 3.009, tau2 60, alpha_Km from memory;
 * the rest read or second-hand); one tier, law full, no potentiation, beta_A 0, no delay: the published
 * model. */
struct muscle_parameters muscle_published(void);
/* The same without fatigue. */
struct muscle_parameters muscle_untiring(void);
/* This project's default composition on it: eight tiers, strength-duration (rheobase 22 mA, chronaxie 180 us,
 * spread 0.25), potentiation gain 2.5, rise 800 ms, decay 300 s, beta_A 4e-4, a pool of sizes. */
struct muscle_parameters muscle_composed(void);

#endif
