/* Accuracy: the engine against CVODE over drawn muscles and trains. */
#ifndef PULSEWRIGHT_TESTS_SUPPORT_ACCURACY_H
#define PULSEWRIGHT_TESTS_SUPPORT_ACCURACY_H
#include <stdint.h>

struct accuracy {
    double force, capacity, potentiation; /* force of the trace's peak, the others absolute; the worst */
};
/* What the engine promises: [0] default, [1] exact. */
extern const struct accuracy accuracy_promised[2];

/* Worst errors over `cases` draws from `seed`: [0] default, [1] exact. Returns how many broke a promise; each
 * is told on stderr. */
int accuracy_of_draws(uint64_t seed, int cases, struct accuracy worst[2]);

#endif
