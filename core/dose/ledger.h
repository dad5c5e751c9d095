/* Ledger: the dose of compiled pulses, found by playing them through the guard that the device runs. */
#ifndef PULSEWRIGHT_CORE_DOSE_LEDGER_H
#define PULSEWRIGHT_CORE_DOSE_LEDGER_H
#include "core/dose/dose.h"
#include "core/status/status.h"

enum { LEDGER_NAME_SIZE = 64 };

struct ledger_figure {
    unsigned channel;
    enum dose_figure figure;
    double value, limit, share; /* in dose_figure_unit; share = value / limit (for gaps limit / value) */
    double at_ms;
    char source[LEDGER_NAME_SIZE]; /* person | stimulator | program */
    bool attention;                /* needs the operator's attention; never makes `within` false */
};
/* Figures that are shown and do not limit: r.m.s. density, power density, charge density, Shannon k. */
struct ledger_shown {
    unsigned channel;
    char name[LEDGER_NAME_SIZE], unit[16];
    double value;
    double attention_above; /* NAN: none */
    bool attention;
};
struct ledger {
    bool within;
    size_t figures, shown;
    struct ledger_figure *figure;
    struct ledger_shown *shown_figure;
    double charge_total_uc, session_ms;
    uint64_t pulses;
};
/* What the ledger needs of a channel. */
struct ledger_channel {
    unsigned channel;
    struct dose_limits limits;
    const char *source[DOSE_FIGURES];
    double pad_cm2, return_pad_cm2; /* NAN where absent: no density, a caution */
};

/* Plays segments (sorted by start; several channels) and fills the ledger. Free with ledger_free. */
enum status ledger_make(const struct segment *segments, size_t count, const struct train_grid *grid,
                        const struct ledger_channel *channels, size_t channel_count, struct ledger *ledger, struct message *why);
void ledger_free(struct ledger *ledger);

#endif
