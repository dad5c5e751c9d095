/* Dose guard: what one channel may be given, checked pulse by pulse just before each is given. The same source runs on the device,
 * in the ledger and in the gate. Freestanding: integers in us, uA, pC; results rounded against the user.
 * Formulas and sources: docs/limits.md. */
#ifndef PULSEWRIGHT_CORE_DOSE_DOSE_H
#define PULSEWRIGHT_CORE_DOSE_DOSE_H
#include "core/train/segment.h"
#include <stdbool.h>
#include <stdint.h>

/* figure, key in documents and JSON, unit of the shown value, what it is in plain words */
#define DOSE_FIGURE_TABLE(X)                                                                                 \
    X(DOSE_NONE, "none", "", "within limits")                                                                \
    X(DOSE_CURRENT, "current", "mA", "peak current")                                                         \
    X(DOSE_DURATION, "duration", "us", "phase duration")                                                     \
    X(DOSE_CHARGE, "charge", "uC", "phase charge")                                                           \
    X(DOSE_RMS, "rms", "mA", "r.m.s. current over one second")                                               \
    X(DOSE_RATE, "rate", "pps", "pulses in one second")                                                      \
    X(DOSE_GAP, "gap", "us", "least time between pulses")                                                    \
    X(DOSE_ENERGY, "energy", "mJ", "pulse energy at 500 ohm")                                                \
    X(DOSE_VOLTAGE, "voltage", "V", "peak voltage at the stated load")                                       \
    X(DOSE_NET_DC, "net_dc", "uA", "net direct current")                                                     \
    X(DOSE_ON_TIME, "on_time", "s", "time from a train's first pulse to its last")                           \
    X(DOSE_DUTY, "duty", "%", "on-time over session time")                                                   \
    X(DOSE_SLEW, "slew", "uC", "rise of charge from pulse to pulse")                                         \
    X(DOSE_SESSION_TIME, "session_time", "s", "session time")                                                \
    X(DOSE_SESSION_PULSES, "session_pulses", "", "pulses in the session")                                    \
    X(DOSE_SESSION_CHARGE, "session_charge", "mC", "charge in the session")

enum dose_figure {
#define DOSE_FIGURE_ENUM(name, key, unit, text) name,
    DOSE_FIGURE_TABLE(DOSE_FIGURE_ENUM)
#undef DOSE_FIGURE_ENUM
    DOSE_FIGURES
};

/* Limits of one channel, every one stated (a message that lacks one is refused). The strictest of stimulator, person and program. */
struct dose_limits {
    uint32_t current_ua;
    uint32_t duration_us;
    uint32_t charge_pc;   /* of a phase; 100 uC = 10^8 pC */
    uint32_t rms_ua;      /* over (t - 1 s, t] */
    uint32_t rate;        /* pulses in that window less opening extras */
    uint32_t gap_us;      /* between two starts; also at least pulse length + 500 us */
    uint32_t energy_uj;   /* at 500 ohm, both phases */
    uint32_t voltage_mv;
    uint32_t load_ohm;
    uint32_t net_dc_na;
    uint32_t mismatch_ppm;
    uint32_t interphase_us;
    uint32_t recovery_us; /* capacitor-balanced; 0: symmetric */
    uint64_t on_us;
    uint32_t duty_permille; /* 1000: no limit; after 60 s */
    uint32_t first_pc;
    uint32_t slew_pc_per_ms; /* 1 uC/s = 1000 pC/ms */
    uint32_t slew_memory_ms; /* half-second slots, at most 10,000 */
    uint32_t step_pc;        /* charge of one step of the stimulator at the limit duration: the least rise always allowed */
    uint64_t session_us;
    uint64_t session_pulses;
    uint64_t session_charge_pc;
};

enum { DOSE_WINDOW_PULSES = 256, DOSE_SLEW_SLOTS = 21, DOSE_TRAIN_SILENCE_US = 250000, DOSE_OPENING_EXTRAS_MAX = 2 };

/* One channel's memory. Plain data; zero it with dose_init. Never cleared while the device is powered. */
struct dose_channel {
    bool any;
    bool in_session;
    uint8_t train_extras; /* opening extras of the present train that the rate does not count */
    uint16_t last_duration_us;
    uint64_t last_us, train_first_us, on_total_us; /* on_total_us: of the trains that ended in this session */
    uint64_t session_start_us, session_pulses, session_charge_pc;
    struct {
        uint64_t at_us;
        uint32_t current_ua;
        uint16_t duration_us;
        bool extra;
    } window[DOSE_WINDOW_PULSES]; /* ring of the last second */
    uint16_t window_head, window_count;
    uint32_t slew_slot_pc[DOSE_SLEW_SLOTS];
    uint64_t slew_slot_number; /* of the newest slot: at_us / 500000 */
};

/* What one check found: the figure broken (DOSE_NONE: none), its value and its limit in the unit of the comparison. */
struct dose_verdict {
    enum dose_figure figure;
    uint64_t value, limit;
};

void dose_init(struct dose_channel *channel);
/* A session starts now for this channel: totals set to what is handed (from the gate), windows and slots kept. */
void dose_session(struct dose_channel *channel, uint64_t now_us, uint64_t pulses, uint64_t charge_pc);
/* Would this pulse be within every limit? Changes nothing. A pulse of zero current is silence: within. */
struct dose_verdict dose_check(const struct dose_limits *limits, const struct dose_channel *channel, const struct pulse *pulse);
/* Every figure as it would stand after this pulse, and its limit (that of slew depends on the moment), in the units of the
 * comparison: uA, us, pC, uA, pulses, us, uJ, mV, nA, us, permille, pC, us, pulses, pC. The ledger shows these. */
void dose_measure(const struct dose_limits *limits, const struct dose_channel *channel, const struct pulse *pulse,
                  uint64_t value[DOSE_FIGURES], uint64_t limit[DOSE_FIGURES]);
/* The greatest charge that slew allows for a pulse at at_us (ease lowers to it). */
uint32_t dose_slew_allowed_pc(const struct dose_limits *limits, const struct dose_channel *channel, uint64_t at_us);
/* Notes a pulse as given. */
void dose_given(struct dose_channel *channel, const struct pulse *pulse);
/* Per figure the stricter of two. */
struct dose_limits dose_stricter(const struct dose_limits *a, const struct dose_limits *b);
/* The program's own ceilings (4-limits: compiled in, no document raises them). */
struct dose_limits dose_program_limits(void);
/* Charge of a phase in pC. Bounds keep it within 32 bits. */
static inline uint32_t dose_charge_pc(uint32_t current_ua, uint32_t duration_us)
{
    return current_ua * duration_us;
}
const char *dose_figure_key(enum dose_figure figure);
const char *dose_figure_unit(enum dose_figure figure);
const char *dose_figure_text(enum dose_figure figure);

#endif
