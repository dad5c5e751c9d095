/* A muscle at a glance. The goal of this code: four curves that a person in the field knows, from the same
 * engine as every prediction. Force-frequency and staircase: common practice, no source; the bout and the
 * currents shown are this project's choice. */
#include "core/predict/curves.h"

#include "core/muscle/recruitment.h"
#include "core/predict/periods.h"

#include <math.h>
#include <stdio.h>
#include <string.h>

enum { BOUT_CONTRACTIONS = 30 };
#define BOUT_PPS 40.0
#define BOUT_ON_MS 1000.0
#define BOUT_CYCLE_MS 2000.0
#define TRAIN_MS 1000.0
#define STAIRCASE_GAP_MS 500.0
#define RECOVERY_S 600.0
#define SHOWN_AT_US 300.0

static const double frequencies_pps[CURVES_FREQUENCIES] = {1,  2,  3,  4,  5,  6,  8,  10, 12, 14, 16, 18,
                                                           20, 25, 30, 35, 40, 45, 50, 60, 70, 80, 90, 100};

/* Pulses at a rate for on_ms, all recruited; what force does until `after_ms` behind the last pulse. */
static struct gather train(struct engine *engine, double pps, double on_ms, double after_ms)
{
    struct gather gather = gather_empty();
    const double start_ms = engine->time_ms, gap_ms = train_period_us(pps) / 1000.0;
    const int pulses = (int)ceil(on_ms / gap_ms - 1e-9);
    for (int i = 0; i < pulses; i++) {
        gather_advance(&gather, engine, start_ms + i * gap_ms);
        engine_pulse(engine, 1);
    }
    gather_advance(&gather, engine, engine->time_ms + after_ms);
    return gather;
}

/* Long enough after the last pulse for the peak to come. */
static double peak_wait_ms(const struct muscle_parameters *p)
{
    return 4 * p->tau1_rest_ms + p->tau2_ms + 20 * p->tau_c_ms;
}

static double peak_from(const struct engine *from, struct engine *scratch, double pps)
{
    *scratch = *from;
    /* what force is left of before does not count */
    return train(scratch, pps, TRAIN_MS, peak_wait_ms(&from->muscle.parameters)).greatest;
}

static void potentiate(struct engine *engine)
{
    for (unsigned i = 0; i < LANES_MAX; i++) engine->state.P[i] = 1;
    engine->fresh = false;
}

static void make_bout(struct engine *engine, struct curves *curves)
{
    for (int i = 0; i < BOUT_CONTRACTIONS; i++) {
        engine_advance(engine, i * BOUT_CYCLE_MS);
        (void)train(engine, BOUT_PPS, BOUT_ON_MS, 0);
    }
    (void)snprintf(curves->bout, sizeof curves->bout,
                   "%d contractions of %g s at %g pps, every %g s, fully recruited", BOUT_CONTRACTIONS,
                   BOUT_ON_MS / 1000, BOUT_PPS, BOUT_CYCLE_MS / 1000);
}

static void make_recruitment(const struct recruitment *recruitment, struct curves *curves)
{
    static const double shown[CURVES_CURRENTS_MAX] = {0.05, 0.25, 0.5, 0.75, 0.95};
    curves->durations = CURVES_DURATIONS;
    for (int i = 0; i < CURVES_DURATIONS; i++) curves->duration_us[i] = 10.0 * i;
    if (recruitment->law == RECRUITMENT_DURATION_EXPONENTIAL) {
        curves->current_ma[curves->currents++] = recruitment->current_ma;
    } else if (recruitment->law == RECRUITMENT_STRENGTH_DURATION) {
        for (int i = 0; i < CURVES_CURRENTS_MAX; i++) {
            const double current_ma = round(recruitment_current_ma(recruitment, shown[i], SHOWN_AT_US));
            if (curves->currents == 0 || current_ma > curves->current_ma[curves->currents - 1])
                curves->current_ma[curves->currents++] = current_ma;
        }
    }
    for (size_t row = 0; row < curves->currents; row++)
        for (int i = 0; i < CURVES_DURATIONS; i++)
            curves->recruited[row][i] =
                recruitment_of(recruitment, curves->duration_us[i], curves->current_ma[row]);
}

enum status curves_make(const struct muscle_parameters *parameters, struct curves *curves,
                        struct message *why)
{
    struct muscle muscle;
    struct engine rested, tired, scratch;
    const enum status status = muscle_init(&muscle, parameters, why);
    if (status != STATUS_OK) return status;
    memset(curves, 0, sizeof *curves);
    engine_init(&rested, &muscle, false, NULL);
    tired = rested;
    curves->has_dormant = parameters->has_potentiation;
    curves->has_tired = parameters->alpha_A_per_ms2 != 0 || parameters->alpha_Km_per_ms_n != 0 ||
                        parameters->beta_A_per_pulse != 0;

    make_bout(&tired, curves);
    scratch = tired;
    curves->recovery = CURVES_RECOVERY;
    for (int i = 0; i < CURVES_RECOVERY; i++) {
        const double part = i / (CURVES_RECOVERY - 1.0);
        curves->recovery_s[i] = RECOVERY_S * part * part; /* denser at first */
        engine_advance(&scratch, tired.time_ms + 1000 * curves->recovery_s[i]);
        curves->remaining_20[i] = muscle_force_remaining(&muscle, &scratch.state, 20);
        curves->remaining_50[i] = muscle_force_remaining(&muscle, &scratch.state, 50);
    }
    engine_advance(&tired, tired.time_ms + BOUT_CYCLE_MS - BOUT_ON_MS);

    curves->frequencies = CURVES_FREQUENCIES;
    for (int i = 0; i < CURVES_FREQUENCIES; i++) {
        struct engine potentiated = rested;
        potentiate(&potentiated);
        curves->frequency_pps[i] = frequencies_pps[i];
        curves->rested_n[i] = peak_from(&potentiated, &scratch, frequencies_pps[i]);
        curves->dormant_n[i] =
            curves->has_dormant ? peak_from(&rested, &scratch, frequencies_pps[i]) : (double)NAN;
        curves->tired_n[i] =
            curves->has_tired ? peak_from(&tired, &scratch, frequencies_pps[i]) : (double)NAN;
    }

    scratch = rested;
    curves->staircase = CURVES_STAIRCASE;
    for (int i = 0; i < CURVES_STAIRCASE; i++) {
        curves->staircase_s[i] = i * STAIRCASE_GAP_MS / 1000;
        curves->staircase_n[i] = train(&scratch, 2, STAIRCASE_GAP_MS, STAIRCASE_GAP_MS).greatest;
    }
    make_recruitment(&parameters->recruitment, curves);
    return STATUS_OK;
}
