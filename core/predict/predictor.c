/* A predictor: one muscle's state between pulses, as callers hold it. The goal of this code: a plain value
 * that copies by memcpy, so that a search may share prefixes of a session. */
#include "core/predict/predict.h"

#include "core/muscle/recruitment.h"
#include "core/predict/predictor.h"

#include <math.h>
#include <stdlib.h>
#include <string.h>

static enum status check_motion(const struct motion *motion, struct message *why)
{
    if (!motion) return STATUS_OK;
    if (motion->samples < 2)
        return status_fail(why, STATUS_REFUSED, "a motion has %zu rows, it needs 2", motion->samples);
    for (size_t i = 0; i < motion->samples; i++) {
        if (!isfinite(motion->time_ms[i]) || !isfinite(motion->relative_length[i]) ||
            !isfinite(motion->relative_velocity[i]))
            return status_fail(why, STATUS_REFUSED, "row %zu of the motion holds what is no number", i + 1);
        if (i > 0 && !(motion->time_ms[i] > motion->time_ms[i - 1]))
            return status_fail(why, STATUS_REFUSED, "row %zu of the motion is at %g ms, not after %g ms",
                               i + 1, motion->time_ms[i], motion->time_ms[i - 1]);
    }
    return STATUS_OK;
}

struct predictor *predictor_new(const struct muscle_parameters *parameters, bool exact,
                                const struct motion *motion, struct message *why)
{
    struct muscle muscle;
    if (muscle_init(&muscle, parameters, why) != STATUS_OK || check_motion(motion, why) != STATUS_OK)
        return NULL;
    struct predictor *predictor = aligned_alloc(64, sizeof *predictor);
    if (!predictor) {
        (void)status_fail(why, STATUS_INTERNAL, "out of memory");
        return NULL;
    }
    memset(predictor, 0, sizeof *predictor);
    engine_init(&predictor->engine, &muscle, exact, motion);
    return predictor;
}

void predictor_free(struct predictor *predictor)
{
    free(predictor);
}

size_t predictor_size(void)
{
    return sizeof(struct predictor);
}

void predictor_copy(struct predictor *to, const struct predictor *from)
{
    memcpy(to, from, sizeof *to);
}

double predictor_time_ms(const struct predictor *predictor)
{
    return predictor->engine.time_ms;
}

void predictor_advance(struct predictor *predictor, double time_ms)
{
    engine_advance(&predictor->engine, time_ms);
}

void predictor_pulse(struct predictor *predictor, double duration_us, double current_ma)
{
    double rho = predictor->rho;
    if (!(rho > 0) || duration_us != predictor->duration_us || current_ma != predictor->current_ma) {
        rho = recruitment_of(&predictor->engine.muscle.parameters.recruitment, duration_us, current_ma);
        if (!(rho > 0)) return;
        predictor->duration_us = duration_us;
        predictor->current_ma = current_ma;
        predictor->rho = rho;
    }
    engine_pulse(&predictor->engine, rho);
}

double predictor_force_n(const struct predictor *predictor)
{
    return engine_force_n(&predictor->engine) + predictor->engine.muscle.parameters.tone_n;
}

double predictor_capacity(const struct predictor *predictor)
{
    return muscle_capacity(&predictor->engine.muscle, &predictor->engine.state);
}

double predictor_potentiation(const struct predictor *predictor)
{
    return muscle_potentiation(&predictor->engine.state);
}

double predictor_activation(const struct predictor *predictor)
{
    return muscle_activation(&predictor->engine.muscle, &predictor->engine.state);
}

double predictor_force_remaining(const struct predictor *predictor, double frequency_pps)
{
    return muscle_force_remaining(&predictor->engine.muscle, &predictor->engine.state, frequency_pps);
}
