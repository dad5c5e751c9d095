/* The sheet in words. The goal of this code: a clinician finds the verdict first, then what will be done, how
 * near the limits it comes, what to watch for and where to sign, without a single key name. */
#include "core/plan/sheet.h"

#include "core/digest/blake2b.h"
#include "core/report/cautions.h"
#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

/* Room for the longest sheet there can be: every channel with all its blocks, figures and notes; every muscle
 * with all its limits. */
enum {
    COMMON_LINES = 40, /* head, cautions, stop rules, approval */
    CHANNEL_LINES = 8 + 2 * SHEET_BLOCKS_MAX,
    LEDGER_LINES = DOSE_FIGURES + 8, /* a channel */
    MUSCLE_LINES = 17
};
_Static_assert(COMMON_LINES + PLAN_NOTES_MAX + STIMULATOR_CHANNELS_MAX * (CHANNEL_LINES + LEDGER_LINES) <=
                   SHEET_LINES_MAX,
               "a plan's sheet is never cut off");
_Static_assert(COMMON_LINES + PROFILE_MUSCLES_MAX * MUSCLE_LINES <= SHEET_LINES_MAX, "nor a profile's");

__attribute__((format(printf, 3, 4))) static void add(struct sheet *sheet, enum sheet_style style,
                                                      const char *format, ...)
{
    if (sheet->lines == SHEET_LINES_MAX)
        abort(); /* never a sheet with its end cut off: it is what gets signed */
    struct sheet_line *line = &sheet->line[sheet->lines++];
    va_list list;
    line->style = style;
    va_start(list, format);
    (void)vsnprintf(line->text, sizeof line->text, format, list);
    va_end(list);
}

const char *sheet_time(double ms, char buffer[32])
{
    char text[32];
    if (ms < 1000)
        (void)snprintf(text, sizeof text, "%.0f ms", ms);
    else if (ms < 120000)
        (void)snprintf(text, sizeof text, "%.3g s", ms / 1000);
    else
        (void)snprintf(text, sizeof text, "%.1f min", ms / 60000);
    memcpy(buffer, text, sizeof text);
    return buffer;
}

static const char *shape_words(enum ramp_shape shape)
{
    return shape == RAMP_LINEAR ? "even" : shape == RAMP_RAISED_COSINE ? "S-shaped" : "fast at first";
}

static void add_ramps(char *text, size_t size, const struct contraction *settings)
{
    char time[32];
    const size_t used = strlen(text);
    if (settings->ramp_up.ms > 0)
        (void)snprintf(text + used, size - used, "; up in %s (%s)", sheet_time(settings->ramp_up.ms, time),
                       shape_words(settings->ramp_up.shape));
    const size_t more = strlen(text);
    if (settings->ramp_down.ms > 0)
        (void)snprintf(text + more, size - more, ", down in %s (%s)",
                       sheet_time(settings->ramp_down.ms, time), shape_words(settings->ramp_down.shape));
}

static void add_settings(char *text, size_t size, const struct contraction *settings)
{
    char hold[32];
    const char *opening = settings->pairs          ? ", in pairs"
                          : settings->opening == 2 ? ", first two close together"
                          : settings->opening == 3 ? ", first three close together"
                                                   : "";
    if (settings->gaps) {
        (void)snprintf(text, size, "%zu pulses at stated gaps%s, %g mA, phase duration %g us",
                       settings->gaps + 1, "", settings->current_ma, settings->duration_us);
        return;
    }
    (void)snprintf(text, size, "%g %s a second%s, hold %s, ", settings->frequency_pps,
                   settings->pairs ? "pairs" : "pulses", opening, sheet_time(settings->hold_ms, hold));
    size_t used = strlen(text);
    if (!isnan(settings->trim_current_ma) && fabs(settings->trim_current_ma - settings->current_ma) > 1e-9)
        (void)snprintf(text + used, size - used, "%g to %g mA, ", settings->current_ma,
                       settings->trim_current_ma);
    else
        (void)snprintf(text + used, size - used, "%g mA, ", settings->current_ma);
    used = strlen(text);
    if (!isnan(settings->trim_duration_us) && fabs(settings->trim_duration_us - settings->duration_us) > 1e-9)
        (void)snprintf(text + used, size - used, "phase duration %g to %g us over the hold",
                       settings->duration_us, settings->trim_duration_us);
    else
        (void)snprintf(text + used, size - used, "phase duration %g us", settings->duration_us);
    add_ramps(text, size, settings);
}

static void add_block(struct sheet *sheet, const struct plan_block *block)
{
    char settings[SHEET_TEXT_SIZE / 2] = "", numbers[48];
    const unsigned last = block->first + block->count - 1;
    add_settings(settings, sizeof settings, &block->settings);
    if (block->count > 1)
        (void)snprintf(numbers, sizeof numbers, "Contractions %u to %u", block->first, last);
    else
        (void)snprintf(numbers, sizeof numbers, "Contraction %u", block->first);
    add(sheet, SHEET_TEXT, "%s%s: %s.", numbers, block->warm_up ? " (warm-up)" : "", settings);
    if (!isnan(block->recount.mean_n_first))
        add(sheet, SHEET_SMALL,
            "expected: mean force %.1f to %.1f N, ripple up to %.1f %%; afterwards %.0f %% of the rested "
            "force at 50 pulses a second remains",
            block->recount.mean_n_low, block->recount.mean_n_high, block->recount.ripple_percent,
            100 * block->recount.remaining_50);
}

static void add_channel(struct sheet *sheet, const struct plan *plan, const struct plan_channel *channel)
{
    add(sheet, SHEET_HEADING, "Channel %u: %s%s%s", channel->channel, channel->muscle,
        channel->side[0] ? ", " : "", channel->side);
    if (!isnan(channel->target_n) && channel->demand.contractions) {
        char hold[32], rest[32];
        add(sheet, SHEET_TEXT,
            "Asked: %.4g N within %g %%, held %s, %u times%s, with rests of %s; ripple at most %g %%.",
            channel->target_n, channel->demand.tolerance_percent, sheet_time(channel->demand.hold_ms, hold),
            channel->demand.contractions, channel->demand.warm_up ? " after warming up" : "",
            sheet_time(channel->demand.rest_ms, rest), channel->demand.ripple_percent_max);
    }
    for (size_t b = 0; b < channel->blocks && b < SHEET_BLOCKS_MAX; b++) add_block(sheet, &channel->block[b]);
    if (channel->blocks > SHEET_BLOCKS_MAX)
        add(sheet, SHEET_SMALL, "and %zu further blocks of the same kind; the plan document holds every one",
            channel->blocks - SHEET_BLOCKS_MAX);
    if (!isnan(channel->comfort_ma))
        add(sheet, SHEET_TEXT, "Never above %g mA, the current that was found comfortable%s.",
            channel->comfort_ma,
            strcmp(plan->as_found, "single") == 0
                ? " with single pulses: begin at strength 0 and raise it by hand"
                : "");
    if (!isnan(channel->force_cap_n))
        add(sheet, SHEET_TEXT, "Force is capped at %g N.", channel->force_cap_n);
}

static void add_ledger(struct sheet *sheet, const struct ledger *ledger)
{
    char time[32];
    add(sheet, SHEET_HEADING, ledger->within ? "Dose: within every limit" : "Dose: a limit is broken");
    add(sheet, SHEET_ROW, "figure\tgreatest\tlimit\tshare\twhose limit");
    for (size_t i = 0; i < ledger->figures; i++) {
        const struct ledger_figure *figure = &ledger->figure[i];
        const char *unit = dose_figure_unit(figure->figure);
        add(sheet, SHEET_ROW, "channel %u, %s\t%.4g %s\t%.4g %s\t%.0f %%\t%s%s", figure->channel,
            dose_figure_text(figure->figure), figure->value, unit, figure->limit, unit, 100 * figure->share,
            figure->source, figure->attention ? " (needs attention)" : "");
    }
    for (size_t i = 0; i < ledger->shown; i++)
        if (ledger->shown_figure[i].attention)
            add(sheet, SHEET_TEXT, "Needs attention: %s on channel %u is %.3g %s.",
                ledger->shown_figure[i].name, ledger->shown_figure[i].channel, ledger->shown_figure[i].value,
                ledger->shown_figure[i].unit);
    add(sheet, SHEET_TEXT, "In all %llu pulses and %.4g mC in %s.", (unsigned long long)ledger->pulses,
        ledger->charge_total_uc / 1000, sheet_time(ledger->session_ms, time));
}

static void add_cautions(struct sheet *sheet)
{
    add(sheet, SHEET_HEADING, "Cautions (usual ones, not exhaustive)");
    add(sheet, SHEET_TEXT, "%s", caution_heading);
    for (size_t i = 0; i < cautions_count; i++) add(sheet, SHEET_TEXT, "- %s", cautions[i].text);
}

static void add_stop_rules(struct sheet *sheet, const struct plan *plan)
{
    add(sheet, SHEET_HEADING, "Stop");
    if (plan->demand.has_stop_if)
        add(sheet, SHEET_TEXT,
            "Stop by hand where %u contractions in a row lie %g %% above or %g %% below the prediction: this "
            "version does not do it by itself.",
            plan->demand.stop_if.contractions, plan->demand.stop_if.over_percent,
            plan->demand.stop_if.under_percent);
    add(sheet, SHEET_TEXT,
        "Output ends within 0.2 s when the computer goes quiet. Nothing begins again by itself.");
}

void sheet_of_plan(const struct plan *plan, const char *approval, struct sheet *sheet)
{
    memset(sheet, 0, sizeof *sheet);
    add(sheet, SHEET_VERDICT, "%s", plan->verdict);
    add(sheet, SHEET_TEXT, "%s", approval);
    add(sheet, SHEET_TEXT, "Person %s. Stimulator %s%s%s.%s%s", plan->person, plan->stimulator.name,
        plan->stimulator.unit[0] ? ", unit " : "", plan->stimulator.unit, plan->goal[0] ? " Goal: " : "",
        plan->goal);
    for (size_t i = 0; i < plan->notes; i++) add(sheet, SHEET_TEXT, "Note: %s", plan->note[i]);
    if (!isnan(plan->ensemble_met_share))
        add(sheet, SHEET_TEXT,
            "Of the muscles that this one may be, by the profile's uncertainty, %.0f %% would meet the whole "
            "demand.",
            100 * plan->ensemble_met_share);
    for (size_t c = 0; c < plan->channels; c++) add_channel(sheet, plan, &plan->channel[c]);
    add_ledger(sheet, &plan->ledger);
    add_cautions(sheet);
    add_stop_rules(sheet, plan);
    add(sheet, SHEET_HEADING, "Approval");
    add(sheet, SHEET_ROW, "name and role\t\tdate and time\t\tsignature");
    add(sheet, SHEET_SMALL, "made by %s; profile %.16s, demand %.16s, stimulator %.16s", plan->program,
        plan->profile_digest, plan->demand_digest, plan->stimulator_digest);
}

static void add_limit(struct sheet *sheet, const char *name, double value, const char *unit)
{
    if (!isnan(value)) add(sheet, SHEET_ROW, "%s\t%g %s", name, value, unit);
}

static void add_muscle(struct sheet *sheet, const struct profile_muscle *muscle, struct date today)
{
    const struct muscle_parameters *p = &muscle->parameters;
    const struct person_limits *l = &muscle->limits;
    add(sheet, SHEET_HEADING, "%s", muscle->name);
    if (muscle->has_measured && muscle->measured.on.year) {
        add(sheet, SHEET_TEXT, "Measured on %04d-%02d-%02d%s%s.", muscle->measured.on.year,
            muscle->measured.on.month, muscle->measured.on.day, muscle->measured.electrodes[0] ? ", " : "",
            muscle->measured.electrodes);
        const long age = today.year ? date_days(today) - date_days(muscle->measured.on) : 0;
        if (age > 14)
            add(sheet, SHEET_TEXT, "This profile is %ld days old: measure again before it is relied on.",
                age);
    }
    if (!p->has_force || !p->has_fatigue) {
        add(sheet, SHEET_TEXT, "Not yet fitted: record test trains first.");
    } else {
        add(sheet, SHEET_TEXT,
            "Strength parameter %.3g N/ms, activation time %.3g ms, relaxation %.3g ms; recovers from "
            "fatigue with a time constant of %.0f s.",
            p->A_rest_n_per_ms, p->tau_c_ms, p->tau1_rest_ms, p->tau_fat_ms / 1000);
    }
    if (muscle->has_found)
        add(sheet, SHEET_TEXT, "Found with %s of %g us: threshold %g mA, comfortable up to %g mA.",
            muscle->found.as_train ? "a train" : "single pulses", muscle->found.duration_us,
            muscle->found.threshold_ma, muscle->found.comfort_ma);
    if (!muscle->has_limits) {
        add(sheet, SHEET_TEXT, "No limits of this person are set: the program's ceilings hold.");
        return;
    }
    add(sheet, SHEET_TEXT, "Limits%s%s:", muscle->limits_set_by[0] ? " set by " : "", muscle->limits_set_by);
    add_limit(sheet, "peak current", l->current_ma, "mA");
    add_limit(sheet, "phase duration", l->duration_us, "us");
    add_limit(sheet, "pulses a second", l->frequency_pps, "");
    add_limit(sheet, "charge of a phase", l->charge_uc, "uC");
    add_limit(sheet, "r.m.s. current over a second", l->rms_ma, "mA");
    add_limit(sheet, "longest train", l->on_ms / 1000, "s");
    add_limit(sheet, "on-time over session time", l->duty_percent, "%");
    add_limit(sheet, "charge of a session", l->session_charge_mc, "mC");
    add_limit(sheet, "force", l->force_n, "N");
}

void sheet_of_profile(const struct profile *profile, const char *approval, struct date today,
                      struct sheet *sheet)
{
    memset(sheet, 0, sizeof *sheet);
    add(sheet, SHEET_VERDICT, "Person %s: %zu muscle%s", profile->person, profile->muscles,
        profile->muscles == 1 ? "" : "s");
    add(sheet, SHEET_TEXT, "%s", approval);
    for (size_t m = 0; m < profile->muscles; m++) add_muscle(sheet, &profile->muscle[m], today);
    add_cautions(sheet);
}

void sheet_digest(const struct sheet *sheet, uint8_t digest[DIGEST_SIZE])
{
    struct blake2b hash;
    blake2b_begin(&hash, DIGEST_SIZE);
    for (size_t i = 0; i < sheet->lines; i++) {
        blake2b_add(&hash, sheet->line[i].text, strlen(sheet->line[i].text));
        blake2b_add(&hash, "\n", 1);
    }
    blake2b_end(&hash, digest);
}
