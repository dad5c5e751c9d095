/* Dose ledger. The goal of this code: figures that are found by playing the very pulses through the very
 * guard, not by formula from a plan. Shown figures: r.m.s. density (IEC 60601-2-10, from memory: 2 mA/cm2
 * needs the operator's attention), power density (FDA guidance on powered muscle stimulators 1999, secondary
 * source: 0.25 W/cm2), charge density and Shannon k (Shannon 1992). */
#include "core/dose/ledger.h"

#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

enum { CHANNELS_MAX = 8, SHOWN_PER_CHANNEL = 5, SHARE_WITHOUT_END = 1000000, ATTENTION_DC_NA = 10000 };

/* A figure in its shown unit for one unit of the comparison. */
static double shown_per_unit(enum dose_figure figure)
{
    switch (figure) {
    case DOSE_CURRENT:
    case DOSE_RMS:
    case DOSE_ENERGY:
    case DOSE_VOLTAGE:
    case DOSE_NET_DC: return 1e-3;
    case DOSE_DUTY: return 0.1;
    case DOSE_CHARGE:
    case DOSE_SLEW:
    case DOSE_ON_TIME:
    case DOSE_SESSION_TIME: return 1e-6;
    case DOSE_SESSION_CHARGE: return 1e-9;
    default: return 1;
    }
}

struct player {
    const struct ledger_channel *channel;
    struct dose_channel dose;
    struct ledger_figure figure[DOSE_FIGURES];
    double charge_greatest_uc, charge_total_uc, rms_greatest_ma, energy_rate_w;
    uint64_t pulses;
};

/* One segment under way: its next pulse waits. */
struct playing {
    struct segment_cursor cursor;
    struct pulse next;
};

static void note(struct player *player, const struct pulse *pulse)
{
    uint64_t value[DOSE_FIGURES], limit[DOSE_FIGURES];
    dose_measure(&player->channel->limits, &player->dose, pulse, value, limit);
    for (int f = DOSE_NONE + 1; f < DOSE_FIGURES; f++) {
        if (f == DOSE_GAP && value[f] == UINT64_MAX) continue; /* no pulse before */
        const double above = f == DOSE_GAP ? (double)limit[f] : (double)value[f];
        const double below = f == DOSE_GAP ? (double)value[f] : (double)limit[f];
        const double share = below > 0 ? above / below : above > 0 ? SHARE_WITHOUT_END : 0;
        struct ledger_figure *figure = &player->figure[f];
        if (share <= figure->share && figure->channel) continue;
        *figure = (struct ledger_figure){.channel = player->channel->channel,
                                         .figure = (enum dose_figure)f,
                                         .value = (double)value[f] * shown_per_unit((enum dose_figure)f),
                                         .limit = (double)limit[f] * shown_per_unit((enum dose_figure)f),
                                         .share = share,
                                         .at_ms = (double)pulse->at_us / 1e3,
                                         .attention = f == DOSE_NET_DC && value[f] > ATTENTION_DC_NA};
        (void)snprintf(figure->source, sizeof figure->source, "%s",
                       player->channel->source[f] ? player->channel->source[f] : "program");
    }
    const double charge_uc = (double)value[DOSE_CHARGE] / 1e6;
    player->charge_total_uc += charge_uc;
    player->charge_greatest_uc = fmax(player->charge_greatest_uc, charge_uc);
    player->rms_greatest_ma = fmax(player->rms_greatest_ma, (double)value[DOSE_RMS] / 1e3);
    player->pulses++;
    dose_given(&player->dose, pulse);
}

static struct player *player_of(struct player *players, size_t count, unsigned channel)
{
    for (size_t i = 0; i < count; i++)
        if (players[i].channel->channel == channel) return &players[i];
    return NULL;
}

/* Plays all segments in order of time: at each turn the earliest waiting pulse of the segments under way. */
static enum status play(const struct segment *segments, size_t count, const struct train_grid *grid,
                        struct player *players, size_t player_count, uint64_t *last_us, struct message *why)
{
    enum { UNDER_WAY_MAX = 4 * CHANNELS_MAX };
    struct playing under_way[UNDER_WAY_MAX];
    size_t active = 0, taken = 0;
    for (;;) {
        size_t first = 0;
        for (size_t i = 1; i < active; i++)
            if (under_way[i].next.at_us < under_way[first].next.at_us) first = i;
        if (taken < count && (active == 0 || segments[taken].start_us <= under_way[first].next.at_us)) {
            if (active == UNDER_WAY_MAX)
                return status_fail(why, STATUS_DOCUMENT, "too many segments at one time (segment %zu)",
                                   taken);
            segment_begin(&under_way[active].cursor, &segments[taken++], grid);
            if (segment_next(&under_way[active].cursor, &under_way[active].next)) active++;
            continue;
        }
        if (active == 0) return STATUS_OK;
        struct player *player = player_of(players, player_count, under_way[first].next.channel);
        if (!player)
            return status_fail(why, STATUS_DOCUMENT, "a segment is for channel %u, which has no limits",
                               under_way[first].next.channel);
        note(player, &under_way[first].next);
        *last_us = under_way[first].next.at_us;
        if (!segment_next(&under_way[first].cursor, &under_way[first].next))
            under_way[first] = under_way[--active];
    }
}

static void show(struct ledger *ledger, unsigned channel, const char *name, const char *unit, double value,
                 double attention_above)
{
    struct ledger_shown *shown = &ledger->shown_figure[ledger->shown++];
    *shown = (struct ledger_shown){.channel = channel,
                                   .value = value,
                                   .attention_above = attention_above,
                                   .attention = !isnan(attention_above) && value > attention_above};
    (void)snprintf(shown->name, sizeof shown->name, "%s", name);
    (void)snprintf(shown->unit, sizeof shown->unit, "%s", unit);
}

static void show_densities(struct ledger *ledger, const struct player *player)
{
    const double area_cm2 = player->channel->pad_cm2;
    if (isnan(area_cm2) || !(area_cm2 > 0) || !(player->charge_greatest_uc > 0)) return;
    const double density_uc = player->charge_greatest_uc / area_cm2;
    const double rms_a = player->rms_greatest_ma / 1e3;
    show(ledger, player->channel->channel, "rms_density", "mA/cm2", player->rms_greatest_ma / area_cm2, 2);
    show(ledger, player->channel->channel, "power_density", "mW/cm2", rms_a * rms_a * 500 / area_cm2 * 1e3,
         250);
    show(ledger, player->channel->channel, "charge_density", "uC/cm2", density_uc, (double)NAN);
    show(ledger, player->channel->channel, "shannon_k", "",
         log10(density_uc) + log10(player->charge_greatest_uc), (double)NAN);
    if (!isnan(player->channel->return_pad_cm2) && player->channel->return_pad_cm2 > 0)
        show(ledger, player->channel->channel, "return_rms_density", "mA/cm2",
             player->rms_greatest_ma / player->channel->return_pad_cm2, 2);
}

static void fill(struct ledger *ledger, const struct player *players, size_t count)
{
    ledger->within = true;
    for (size_t i = 0; i < count; i++) {
        for (int f = DOSE_NONE + 1; f < DOSE_FIGURES; f++) {
            if (!players[i].figure[f].channel) continue;
            if (players[i].figure[f].share > 1) ledger->within = false;
            ledger->figure[ledger->figures++] = players[i].figure[f];
        }
        show_densities(ledger, &players[i]);
        ledger->charge_total_uc += players[i].charge_total_uc;
        ledger->pulses += players[i].pulses;
    }
}

enum status ledger_make(const struct segment *segments, size_t count, const struct train_grid *grid,
                        const struct ledger_channel *channels, size_t channel_count, struct ledger *ledger,
                        struct message *why)
{
    if (channel_count == 0 || channel_count > CHANNELS_MAX)
        return status_fail(why, STATUS_DOCUMENT, "a ledger takes 1 to %d channels, not %zu", CHANNELS_MAX,
                           channel_count);
    struct player *players = calloc(channel_count, sizeof *players);
    struct ledger made = {.figure = calloc(channel_count * DOSE_FIGURES, sizeof *made.figure),
                          .shown_figure =
                              calloc(channel_count * SHOWN_PER_CHANNEL, sizeof *made.shown_figure)};
    if (!players || !made.figure || !made.shown_figure) {
        free(players);
        ledger_free(&made);
        return status_fail(why, STATUS_INTERNAL, "no memory for the dose ledger");
    }
    for (size_t i = 0; i < channel_count; i++) {
        players[i].channel = &channels[i];
        dose_init(&players[i].dose);
        dose_session(&players[i].dose, 0, 0, 0);
    }
    uint64_t last_us = 0;
    const enum status status = play(segments, count, grid, players, channel_count, &last_us, why);
    if (status == STATUS_OK) {
        fill(&made, players, channel_count);
        made.session_ms = (double)last_us / 1e3;
        *ledger = made;
    } else {
        ledger_free(&made);
    }
    free(players);
    return status;
}

void ledger_free(struct ledger *ledger)
{
    free(ledger->figure);
    free(ledger->shown_figure);
    *ledger = (struct ledger){0};
}
