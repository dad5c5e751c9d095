/* Effective limits. The goal of this code: the strictest of stimulator, person and program, each with whose
 * it is, rounded against the user. A person's limit that is absent is the program's ceiling. */
#include "core/dose/limits.h"

#include <math.h>

struct making {
    struct dose_limits *limits;
    const char **source;
    const char *whose;
};

/* Down to a whole number, not below 0, not above 2^53; a hair above a whole number counts as that number. */
static uint64_t whole_down(double value)
{
    if (!(value > 0)) return 0;
    const double floored = floor(value + 1e-3);
    return floored >= 9007199254740992.0 ? (uint64_t)9007199254740992 : (uint64_t)floored;
}

static uint64_t whole_up(double value)
{
    if (!(value > 0)) return 0;
    return (uint64_t)ceil(value - 1e-3);
}

/* Takes a value where it is stricter than what stands, or nothing stood. */
static void lower32(const struct making *making, uint32_t *field, enum dose_figure figure, double value)
{
    if (isnan(value)) return;
    const uint64_t whole = whole_down(value);
    if (whole >= *field) return;
    *field = (uint32_t)whole;
    making->source[figure] = making->whose;
}

static void lower64(const struct making *making, uint64_t *field, enum dose_figure figure, double value)
{
    if (isnan(value)) return;
    const uint64_t whole = whole_down(value);
    if (whole >= *field) return;
    *field = whole;
    making->source[figure] = making->whose;
}

static void raise_gap(const struct making *making, double value)
{
    if (isnan(value)) return;
    const uint64_t whole = whole_up(value);
    if (whole <= making->limits->gap_us) return;
    making->limits->gap_us = (uint32_t)whole;
    making->source[DOSE_GAP] = making->whose;
}

static void take_device(const struct making *making, const struct dose_device *device)
{
    struct dose_limits *limits = making->limits;
    lower32(making, &limits->current_ua, DOSE_CURRENT, device->current_to_ma * 1e3);
    lower32(making, &limits->duration_us, DOSE_DURATION, device->duration_to_us);
    lower32(making, &limits->rate, DOSE_RATE, device->frequency_to_pps);
    lower32(making, &limits->voltage_mv, DOSE_VOLTAGE, device->compliance_v * 1e3);
    raise_gap(making, device->gap_us_min);
    limits->load_ohm = (uint32_t)whole_up(device->load_ohm);
    limits->mismatch_ppm = (uint32_t)whole_up(device->mismatch_percent * 1e4);
    limits->interphase_us = (uint32_t)whole_up(device->interphase_us);
    limits->recovery_us = device->capacitor_balanced ? (uint32_t)whole_up(device->recovery_us) : 0;
}

static void take_person(const struct making *making, const struct person_limits *person)
{
    struct dose_limits *limits = making->limits;
    lower32(making, &limits->current_ua, DOSE_CURRENT, person->current_ma * 1e3);
    lower32(making, &limits->duration_us, DOSE_DURATION, person->duration_us);
    lower32(making, &limits->rate, DOSE_RATE, person->frequency_pps);
    lower32(making, &limits->charge_pc, DOSE_CHARGE, person->charge_uc * 1e6);
    lower32(making, &limits->rms_ua, DOSE_RMS, person->rms_ma * 1e3);
    raise_gap(making, person->gap_us);
    lower64(making, &limits->on_us, DOSE_ON_TIME, person->on_ms * 1e3);
    lower32(making, &limits->duty_permille, DOSE_DUTY, person->duty_percent * 10);
    lower32(making, &limits->first_pc, DOSE_SLEW, person->first_uc * 1e6);
    lower32(making, &limits->slew_pc_per_ms, DOSE_SLEW, person->slew_uc_per_s * 1e3);
    lower64(making, &limits->session_us, DOSE_SESSION_TIME, person->session_ms * 1e3);
    lower64(making, &limits->session_pulses, DOSE_SESSION_PULSES, person->session_pulses);
    lower64(making, &limits->session_charge_pc, DOSE_SESSION_CHARGE, person->session_charge_mc * 1e9);
}

/* 3,000 ms unless the person's document says otherwise; a person without limits has the program's memory. */
static uint32_t slew_memory_ms(const struct person_limits *person, uint32_t ceiling_ms)
{
    enum { MEMORY_MS_UNLESS_SAID = 3000 };
    const double wanted =
        person && !isnan(person->slew_memory_ms) ? person->slew_memory_ms : MEMORY_MS_UNLESS_SAID;
    const uint64_t whole = whole_down(wanted);
    return whole < ceiling_ms ? (uint32_t)whole : ceiling_ms;
}

void limits_effective(const struct dose_device *device, const struct person_limits *person,
                      struct dose_limits *limits, const char *source[DOSE_FIGURES])
{
    *limits = dose_program_limits();
    for (int figure = 0; figure < DOSE_FIGURES; figure++) source[figure] = "program";
    take_device(&(struct making){limits, source, "stimulator"}, device);
    if (person) take_person(&(struct making){limits, source, "person"}, person);
    limits->slew_memory_ms = slew_memory_ms(person, limits->slew_memory_ms);
    /* one step of the stimulator is the least rise that can be asked for: the larger of a step of duration
     * and one of current */
    const double step_uc = fmax(device->current_step_ma * limits->duration_us,
                                device->duration_step_us * (double)limits->current_ua / 1e3) /
                           1e3;
    limits->step_pc = (uint32_t)whole_up(step_uc * 1e6);
}
