/* The twin's muscle. The goal of this code: core's own model runs a delay behind the pulses, so that force is
 * ready when it is asked for. */
#include "bridge/twin/muscle.h"

#include "core/predict/predict.h"
#include <math.h>
#include <stdlib.h>

enum { WAITING_MAX = 512 };

struct twin_muscle {
    struct predictor *predictor;
    struct muscle_parameters parameters;
    bool begun;
    uint64_t begin_us; /* model time 0 */
    double last_ms;
    struct {
        uint64_t at_us;
        double duration_us, current_ma;
    } waiting[WAITING_MAX];
    unsigned head, count;
};

struct twin_muscle *twin_muscle_new(const struct muscle_parameters *parameters, struct message *why)
{
    struct twin_muscle *muscle = calloc(1, sizeof *muscle);
    if (!muscle) {
        (void)status_fail(why, STATUS_INTERNAL, "no memory for a twin's muscle");
        return NULL;
    }
    muscle->parameters = *parameters;
    muscle->predictor = predictor_new(parameters, false, NULL, why);
    if (muscle->predictor) return muscle;
    free(muscle);
    return NULL;
}

void twin_muscle_free(struct twin_muscle *muscle)
{
    if (!muscle) return;
    predictor_free(muscle->predictor);
    free(muscle);
}

/* Lets the model take what has come due by model time `until_ms`. */
static void run(struct twin_muscle *muscle, double until_ms)
{
    while (muscle->count) {
        const double at_ms = (double)(muscle->waiting[muscle->head].at_us - muscle->begin_us) / 1e3;
        if (at_ms > until_ms) break;
        if (at_ms >= muscle->last_ms + 0.001 ||
            !(muscle->last_ms > 0)) { /* two channels may meet on one muscle: the first counts */
            predictor_advance(muscle->predictor, fmax(at_ms, predictor_time_ms(muscle->predictor)));
            predictor_pulse(muscle->predictor, muscle->waiting[muscle->head].duration_us,
                            muscle->waiting[muscle->head].current_ma);
            muscle->last_ms = at_ms;
        }
        muscle->head = (muscle->head + 1) % WAITING_MAX;
        muscle->count--;
    }
    if (until_ms > predictor_time_ms(muscle->predictor)) predictor_advance(muscle->predictor, until_ms);
}

void twin_muscle_pulse(struct twin_muscle *muscle, uint64_t at_us, double duration_us, double current_ma)
{
    if (!muscle->begun) {
        muscle->begun = true;
        muscle->begin_us = at_us;
    }
    if (muscle->count == WAITING_MAX)
        run(muscle, (double)(muscle->waiting[muscle->head].at_us - muscle->begin_us) / 1e3);
    const unsigned slot = (muscle->head + muscle->count++) % WAITING_MAX;
    muscle->waiting[slot].at_us = at_us;
    muscle->waiting[slot].duration_us = duration_us;
    muscle->waiting[slot].current_ma = current_ma;
}

double twin_muscle_force_n(struct twin_muscle *muscle, uint64_t now_us)
{
    if (!muscle->begun) return muscle->parameters.tone_n;
    const double until_ms = (double)(now_us - muscle->begin_us) / 1e3 - muscle->parameters.delay_ms;
    if (until_ms < 0) return muscle->parameters.tone_n;
    run(muscle, until_ms);
    return predictor_force_n(muscle->predictor);
}
