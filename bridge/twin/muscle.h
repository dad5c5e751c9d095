/* The twin's muscle: pulses in, force out, as a load cell would show it (delay and tone included). Private to
 * bridge/twin. */
#ifndef PULSEWRIGHT_BRIDGE_TWIN_MUSCLE_H
#define PULSEWRIGHT_BRIDGE_TWIN_MUSCLE_H
#include "core/muscle/parameters.h"
#include "core/status/status.h"
#include <stdint.h>

struct twin_muscle;
struct twin_muscle *twin_muscle_new(const struct muscle_parameters *parameters, struct message *why);
void twin_muscle_free(struct twin_muscle *muscle);
/* Pulses come in order of time. */
void twin_muscle_pulse(struct twin_muscle *muscle, uint64_t at_us, double duration_us, double current_ma);
/* Force at now; now only grows. */
double twin_muscle_force_n(struct twin_muscle *muscle, uint64_t now_us);

#endif
