/* Drawn muscles and trains over the whole allowed range of parameters, from a stated seed, so that every run
 * draws the same. */
#ifndef PULSEWRIGHT_TESTS_SUPPORT_DRAWS_H
#define PULSEWRIGHT_TESTS_SUPPORT_DRAWS_H
#include "core/muscle/parameters.h"
#include "core/train/contraction.h"
#include <stddef.h>
#include <stdint.h>

enum { DRAW_PULSES_MAX = 64 };

uint64_t draw_next(uint64_t *state); /* splitmix64 (Steele, Lea, Flood 2014) */
double draw_uniform(uint64_t *state, double from, double to);
double draw_log(uint64_t *state, double from, double to); /* uniform in the logarithm */
struct muscle_parameters draw_muscle(uint64_t *state);
/* Pulses with gaps from 2 ms to a minute and any settings a pulse; returns how many. Long gaps come with slow
 * muscles only (tau1_ms): the reference, an Adams method, needs steps of the order of tau1 however little
 * happens. */
size_t draw_pulses(uint64_t *state, double tau1_ms, struct train_pulse pulses[DRAW_PULSES_MAX]);

#endif
