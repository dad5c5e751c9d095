/* Dose guard. The goal of this code: no pulse beyond a limit is ever given, by one source that the planner's
 * ledger, the gate and the device all run. Integers only, every quotient rounded against the user. Formulas
 * and where they come from: docs/limits.md. Freestanding. */
#include "core/dose/dose.h"

#include <string.h>

enum {
    CURRENT_UA_MAX = 1 << 18,
    DURATION_US_MAX = 1000,
    SECOND_US = 1000000,
    SLOT_US = 500000,
    SLEW_SILENCE_US_MAX = 250000,
    DUTY_AFTER_US = 60000000,
    PULSE_SPARE_US = 500,
    LOAD_OF_ENERGY_OHM = 500
};

/* The largest sums that occur stay inside their types. */
_Static_assert((uint64_t)CURRENT_UA_MAX *DURATION_US_MAX <= UINT32_MAX, "a charge fits 32 bits");
_Static_assert((uint64_t)CURRENT_UA_MAX *CURRENT_UA_MAX <=
                   UINT64_MAX / (2u * DURATION_US_MAX * DOSE_WINDOW_PULSES),
               "r.m.s. sum");
_Static_assert((uint64_t)CURRENT_UA_MAX *CURRENT_UA_MAX <=
                   UINT64_MAX / (2u * DURATION_US_MAX * LOAD_OF_ENERGY_OHM),
               "energy");
_Static_assert((uint64_t)CURRENT_UA_MAX *DURATION_US_MAX *DOSE_WINDOW_PULSES <= UINT64_MAX / SECOND_US,
               "net d.c. sum");
_Static_assert(DOSE_SLEW_SLOTS *SLOT_US >= 10000000, "ten seconds of slew memory");

static uint64_t up(uint64_t value, uint64_t by)
{
    return value / by + (value % by != 0);
}

/* Least whole root not below the true one. */
static uint64_t root_up(uint64_t value)
{
    uint64_t low = 0, high = (uint64_t)1 << 32;
    while (low < high) {
        const uint64_t middle = low + (high - low) / 2;
        if (middle * middle >= value)
            high = middle;
        else
            low = middle + 1;
    }
    return low;
}

/* Both phases' I^2 d in uA^2 us. A recovery phase carries the same charge at a current never above the first
 * phase's, so twice the first phase bounds it from above. */
static uint64_t square_of(uint32_t current_ua, uint32_t duration_us)
{
    return 2 * (uint64_t)current_ua * current_ua * duration_us;
}

void dose_init(struct dose_channel *channel)
{
    memset(channel, 0, sizeof *channel);
}

void dose_session(struct dose_channel *channel, uint64_t now_us, uint64_t pulses, uint64_t charge_pc)
{
    channel->in_session = true;
    channel->session_start_us = now_us;
    channel->session_pulses = pulses;
    channel->session_charge_pc = charge_pc;
    channel->on_total_us = 0;
}

/* Greatest charge given in the slots that lie wholly inside the memory (the present one included). */
static uint32_t remembered_pc(const struct dose_limits *limits, const struct dose_channel *channel,
                              uint64_t at_us)
{
    uint32_t greatest = 0;
    uint64_t slots = (uint64_t)limits->slew_memory_ms * 1000 / SLOT_US;
    if (slots > DOSE_SLEW_SLOTS - 1) slots = DOSE_SLEW_SLOTS - 1;
    const uint64_t now = at_us / SLOT_US;
    for (uint64_t back = 0; back < slots && back <= now; back++) {
        const uint64_t slot = now - back;
        if (slot > channel->slew_slot_number || channel->slew_slot_number - slot >= DOSE_SLEW_SLOTS) continue;
        const uint32_t charge = channel->slew_slot_pc[slot % DOSE_SLEW_SLOTS];
        if (charge > greatest) greatest = charge;
    }
    return greatest;
}

uint32_t dose_slew_allowed_pc(const struct dose_limits *limits, const struct dose_channel *channel,
                              uint64_t at_us)
{
    uint64_t silence_us = SLEW_SILENCE_US_MAX;
    if (channel->any && at_us - channel->last_us < silence_us) silence_us = at_us - channel->last_us;
    uint64_t rise_pc = (uint64_t)limits->slew_pc_per_ms * silence_us / 1000;
    if (rise_pc < limits->step_pc) rise_pc = limits->step_pc;
    uint64_t allowed = channel->any ? remembered_pc(limits, channel, at_us) + rise_pc : rise_pc;
    if (allowed < limits->first_pc) allowed = limits->first_pc;
    return allowed > UINT32_MAX ? UINT32_MAX : (uint32_t)allowed;
}

/* Sums over (at - 1 s, at], this pulse included. */
struct window_sums {
    uint64_t square, charge_pc, counted;
};

static bool train_goes_on(const struct dose_channel *channel, uint64_t at_us)
{
    return channel->any && at_us - channel->last_us < DOSE_TRAIN_SILENCE_US;
}

static bool is_extra(const struct dose_channel *channel, const struct pulse *pulse)
{
    return pulse->opening_extra && train_goes_on(channel, pulse->at_us) &&
           channel->train_extras < DOSE_OPENING_EXTRAS_MAX;
}

static struct window_sums sum_window(const struct dose_channel *channel, const struct pulse *pulse)
{
    struct window_sums sums = {square_of(pulse->current_ua, pulse->duration_us),
                               dose_charge_pc(pulse->current_ua, pulse->duration_us),
                               is_extra(channel, pulse) ? 0 : 1};
    for (unsigned i = 0; i < channel->window_count; i++) {
        const unsigned at =
            ((unsigned)channel->window_head + DOSE_WINDOW_PULSES - 1u - i) % DOSE_WINDOW_PULSES;
        if (pulse->at_us - channel->window[at].at_us >= SECOND_US) break; /* older still lie behind */
        sums.square += square_of(channel->window[at].current_ua, channel->window[at].duration_us);
        sums.charge_pc += dose_charge_pc(channel->window[at].current_ua, channel->window[at].duration_us);
        if (!channel->window[at].extra) sums.counted++;
    }
    return sums;
}

static uint64_t pulse_length_us(const struct dose_limits *limits, uint32_t duration_us)
{
    const uint64_t second = limits->recovery_us ? limits->recovery_us : duration_us;
    return duration_us + limits->interphase_us + second;
}

/* On-time of the newest train up to until_us; one that began before the session counts from the session's
 * start. */
static uint64_t train_on_us(const struct dose_channel *channel, uint64_t until_us)
{
    if (!channel->any || !channel->in_session) return 0;
    const uint64_t start_us = channel->session_start_us;
    const uint64_t from_us = channel->train_first_us > start_us ? channel->train_first_us : start_us;
    return until_us > from_us ? until_us - from_us : 0;
}

static void measure_times(const struct dose_limits *limits, const struct dose_channel *channel,
                          const struct pulse *pulse, uint64_t value[DOSE_FIGURES],
                          uint64_t limit[DOSE_FIGURES])
{
    value[DOSE_GAP] = channel->any ? pulse->at_us - channel->last_us : UINT64_MAX;
    limit[DOSE_GAP] = channel->any ? pulse_length_us(limits, channel->last_duration_us) + PULSE_SPARE_US : 0;
    if (limit[DOSE_GAP] < limits->gap_us) limit[DOSE_GAP] = limits->gap_us;
    const bool goes_on = train_goes_on(channel, pulse->at_us);
    value[DOSE_ON_TIME] = goes_on ? pulse->at_us - channel->train_first_us : 0;
    limit[DOSE_ON_TIME] = limits->on_us;
    const uint64_t session_us = channel->in_session ? pulse->at_us - channel->session_start_us : 0;
    const uint64_t on_us =
        channel->on_total_us + train_on_us(channel, goes_on ? pulse->at_us : channel->last_us);
    value[DOSE_DUTY] = session_us >= DUTY_AFTER_US ? up(on_us * 1000, session_us) : 0;
    limit[DOSE_DUTY] = limits->duty_permille;
    value[DOSE_SESSION_TIME] = session_us;
    limit[DOSE_SESSION_TIME] = limits->session_us;
}

void dose_measure(const struct dose_limits *limits, const struct dose_channel *channel,
                  const struct pulse *pulse, uint64_t value[DOSE_FIGURES], uint64_t limit[DOSE_FIGURES])
{
    const uint32_t charge_pc = dose_charge_pc(pulse->current_ua, pulse->duration_us);
    const struct window_sums sums = sum_window(channel, pulse);
    value[DOSE_NONE] = limit[DOSE_NONE] = 0;
    value[DOSE_CURRENT] = pulse->current_ua;
    limit[DOSE_CURRENT] = limits->current_ua;
    value[DOSE_DURATION] = pulse->duration_us;
    limit[DOSE_DURATION] = limits->duration_us;
    value[DOSE_CHARGE] = charge_pc;
    limit[DOSE_CHARGE] = limits->charge_pc;
    value[DOSE_RMS] =
        root_up(up(sums.square, SECOND_US)); /* root_up(ceil(x)) <= L exactly where x <= L^2, L whole */
    limit[DOSE_RMS] = limits->rms_ua;
    value[DOSE_RATE] = sums.counted;
    limit[DOSE_RATE] = limits->rate;
    /* uA^2 us ohm is 1e-12 uJ */
    value[DOSE_ENERGY] =
        up(square_of(pulse->current_ua, pulse->duration_us) * LOAD_OF_ENERGY_OHM, 1000000000000u);
    limit[DOSE_ENERGY] = limits->energy_uj;
    value[DOSE_VOLTAGE] = up((uint64_t)pulse->current_ua * limits->load_ohm, 1000);
    limit[DOSE_VOLTAGE] = limits->voltage_mv;
    value[DOSE_NET_DC] = up(sums.charge_pc * limits->mismatch_ppm, 1000000000u);
    limit[DOSE_NET_DC] = limits->net_dc_na;
    value[DOSE_SLEW] = charge_pc;
    limit[DOSE_SLEW] = dose_slew_allowed_pc(limits, channel, pulse->at_us);
    value[DOSE_SESSION_PULSES] = channel->session_pulses + 1;
    limit[DOSE_SESSION_PULSES] = limits->session_pulses;
    value[DOSE_SESSION_CHARGE] = channel->session_charge_pc + charge_pc;
    limit[DOSE_SESSION_CHARGE] = limits->session_charge_pc;
    measure_times(limits, channel, pulse, value, limit);
}

struct dose_verdict dose_check(const struct dose_limits *limits, const struct dose_channel *channel,
                               const struct pulse *pulse)
{
    const struct dose_verdict within = {DOSE_NONE, 0, 0};
    if (pulse->current_ua == 0 || pulse->duration_us == 0) return within;
    if (pulse->current_ua > CURRENT_UA_MAX)
        return (struct dose_verdict){DOSE_CURRENT, pulse->current_ua, limits->current_ua};
    if (pulse->duration_us > DURATION_US_MAX)
        return (struct dose_verdict){DOSE_DURATION, pulse->duration_us, limits->duration_us};
    if (channel->any && pulse->at_us < channel->last_us)
        return (struct dose_verdict){DOSE_GAP, 0, limits->gap_us};
    uint64_t value[DOSE_FIGURES], limit[DOSE_FIGURES];
    dose_measure(limits, channel, pulse, value, limit);
    for (int figure = DOSE_NONE + 1; figure < DOSE_FIGURES; figure++) {
        const bool broken =
            figure == DOSE_GAP ? value[figure] < limit[figure] : value[figure] > limit[figure];
        if (broken) return (struct dose_verdict){(enum dose_figure)figure, value[figure], limit[figure]};
    }
    return within;
}

static void remember(struct dose_channel *channel, uint64_t at_us, uint32_t charge_pc)
{
    const uint64_t slot = at_us / SLOT_US;
    if (!channel->any || slot - channel->slew_slot_number >= DOSE_SLEW_SLOTS) {
        memset(channel->slew_slot_pc, 0, sizeof channel->slew_slot_pc);
    } else {
        for (uint64_t passed = channel->slew_slot_number + 1; passed <= slot; passed++)
            channel->slew_slot_pc[passed % DOSE_SLEW_SLOTS] = 0;
    }
    channel->slew_slot_number = slot;
    if (charge_pc > channel->slew_slot_pc[slot % DOSE_SLEW_SLOTS])
        channel->slew_slot_pc[slot % DOSE_SLEW_SLOTS] = charge_pc;
}

void dose_given(struct dose_channel *channel, const struct pulse *pulse)
{
    if (pulse->current_ua == 0 || pulse->duration_us == 0) return;
    const uint32_t charge_pc = dose_charge_pc(pulse->current_ua, pulse->duration_us);
    const bool extra = is_extra(channel, pulse);
    if (!channel->in_session)
        dose_session(channel, pulse->at_us, channel->session_pulses, channel->session_charge_pc);
    if (!train_goes_on(channel, pulse->at_us)) {
        channel->on_total_us += train_on_us(channel, channel->last_us);
        channel->train_first_us = pulse->at_us;
        channel->train_extras = 0;
    }
    if (extra) channel->train_extras++;
    remember(channel, pulse->at_us, charge_pc);
    channel->window[channel->window_head].at_us = pulse->at_us;
    channel->window[channel->window_head].current_ua = pulse->current_ua;
    channel->window[channel->window_head].duration_us = pulse->duration_us;
    channel->window[channel->window_head].extra = extra;
    channel->window_head = (uint16_t)((channel->window_head + 1) % DOSE_WINDOW_PULSES);
    if (channel->window_count < DOSE_WINDOW_PULSES) channel->window_count++;
    channel->session_pulses++;
    channel->session_charge_pc += charge_pc;
    channel->last_us = pulse->at_us;
    channel->last_duration_us = pulse->duration_us;
    channel->any = true;
}

#define LESSER(field)                                                                                        \
    if (b->field < both.field) both.field = b->field
#define GREATER(field)                                                                                       \
    if (b->field > both.field) both.field = b->field

struct dose_limits dose_stricter(const struct dose_limits *a, const struct dose_limits *b)
{
    struct dose_limits both = *a;
    LESSER(current_ua);
    LESSER(duration_us);
    LESSER(charge_pc);
    LESSER(rms_ua);
    LESSER(rate);
    GREATER(gap_us);
    LESSER(energy_uj);
    LESSER(voltage_mv);
    GREATER(load_ohm);
    LESSER(net_dc_na);
    GREATER(mismatch_ppm);
    GREATER(interphase_us);
    GREATER(recovery_us);
    LESSER(on_us);
    LESSER(duty_permille);
    LESSER(first_pc);
    LESSER(slew_pc_per_ms);
    LESSER(slew_memory_ms);
    LESSER(step_pc);
    LESSER(session_us);
    LESSER(session_pulses);
    LESSER(session_charge_pc);
    return both;
}

struct dose_limits dose_program_limits(void)
{
    return (struct dose_limits){
        .current_ua = 200000,
        .duration_us = 1000,
        .charge_pc = 100000000,
        .rms_ua = 50000,
        .rate = 120,
        .gap_us = 2000,
        .energy_uj = 300000,
        .voltage_mv = 500000,
        .load_ohm = 0,
        .net_dc_na = 100000,
        .mismatch_ppm = 0,
        .interphase_us = 0,
        .recovery_us = 0,
        .on_us = (uint64_t)600 * SECOND_US,
        .duty_permille = 1000,
        .first_pc = 100000000,
        .slew_pc_per_ms = 1000000,
        .slew_memory_ms = 10000,
        .step_pc = 100000000,
        .session_us = (uint64_t)3 * 3600 * SECOND_US,
        .session_pulses = 1000000,
        .session_charge_pc = 20000000000000u,
    };
}

#define FIGURE_KEY(name, key, unit, text) key,
#define FIGURE_UNIT(name, key, unit, text) unit,
#define FIGURE_TEXT(name, key, unit, text) text,
static const char *const figure_keys[] = {DOSE_FIGURE_TABLE(FIGURE_KEY)};
static const char *const figure_units[] = {DOSE_FIGURE_TABLE(FIGURE_UNIT)};
static const char *const figure_texts[] = {DOSE_FIGURE_TABLE(FIGURE_TEXT)};

const char *dose_figure_key(enum dose_figure figure)
{
    return (unsigned)figure < DOSE_FIGURES ? figure_keys[figure] : "unknown";
}

const char *dose_figure_unit(enum dose_figure figure)
{
    return (unsigned)figure < DOSE_FIGURES ? figure_units[figure] : "";
}

const char *dose_figure_text(enum dose_figure figure)
{
    return (unsigned)figure < DOSE_FIGURES ? figure_texts[figure] : "unknown figure";
}
