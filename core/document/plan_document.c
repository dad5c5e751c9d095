/* Plan documents: whole in themselves. The goal of this code: what was signed can be read back, to the pulse,
 * by anyone. */
#include "core/document/plan_document.h"

#include "core/document/fields.h"
#include "core/document/schemas.h"
#include <libfyaml.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

typedef struct contraction CN;
typedef struct plan_why WY;
typedef struct plan_recount RT;
typedef struct plan_block PB;
typedef struct plan_channel CH;
typedef struct plan_ramp_trial TR;
typedef struct dose_limits DL;
typedef struct ledger_figure LF;
typedef struct ledger_shown LS;
typedef struct plan PN;

#define WHY_TEXT(name, text) text,
static const char *const reasons[] = {PLAN_WHY_TABLE(WHY_TEXT) NULL};
static const char *const no_yes[] = {"no", "yes", NULL};
#define FIGURE_KEY(name, key, unit, text) key,
static const char *const figure_keys[] = {DOSE_FIGURE_TABLE(FIGURE_KEY) NULL};

const char *plan_why_text(enum plan_why_reason reason)
{
    return (unsigned)reason < PLAN_WHY_REASONS ? reasons[reason] : "unknown";
}

static const struct field why_fields[] = {
    CHOICE_NEEDED(WY, reason, "reason", reasons, "from the fixed list"),
    NUMBER(WY, value, "value", -HUGE_VAL, HUGE_VAL, "what was compared"),
    NUMBER(WY, limit, "limit", -HUGE_VAL, HUGE_VAL, "with what"), TEXT(WY, unit, "unit", "unit of both"),
    LAST};
static const struct schema why_schema = {
    .name = "why", .size = sizeof(WY), .flow = true, .fields = why_fields};

static const struct field recount_fields[] = {
    NUMBER(RT, mean_n_first, "mean_n_first", -HUGE_VAL, HUGE_VAL, "mean of the first contraction, N"),
    NUMBER(RT, mean_n_last, "mean_n_last", -HUGE_VAL, HUGE_VAL, "mean of the last, N"),
    NUMBER(RT, mean_n_low, "mean_n_low", -HUGE_VAL, HUGE_VAL, "least mean, N"),
    NUMBER(RT, mean_n_high, "mean_n_high", -HUGE_VAL, HUGE_VAL, "greatest mean, N"),
    NUMBER(RT, peak_n, "peak_n", -HUGE_VAL, HUGE_VAL, "greatest force, N"),
    NUMBER(RT, ripple_percent, "ripple_percent", -HUGE_VAL, HUGE_VAL, "worst ripple, %"),
    NUMBER(RT, droop_percent, "droop_percent", -HUGE_VAL, HUGE_VAL, "worst droop, %"),
    NUMBER(RT, rise_ms, "rise_ms", -HUGE_VAL, HUGE_VAL, "latest rise, ms"),
    NUMBER(RT, overshoot_percent, "overshoot_percent", -HUGE_VAL, HUGE_VAL, "worst overshoot, %"),
    NUMBER(RT, capacity, "capacity", -HUGE_VAL, HUGE_VAL, "at the block's end"),
    NUMBER(RT, remaining_20, "remaining_20", -HUGE_VAL, HUGE_VAL,
           "remaining force at 20 pps, at the block's end"),
    NUMBER(RT, remaining_50, "remaining_50", -HUGE_VAL, HUGE_VAL,
           "remaining force at 50 pps, at the block's end"),
    NUMBER(RT, band_5_n, "band_5_n", -HUGE_VAL, HUGE_VAL, "5 % of the ensemble's mean, N"),
    NUMBER(RT, band_95_n, "band_95_n", -HUGE_VAL, HUGE_VAL, "95 % of the ensemble's mean, N"),
    LAST};
static const struct schema recount_schema = {
    .name = "recount", .size = sizeof(RT), .flow = true, .fields = recount_fields};

static const struct field trim_fields[] = {
    NUMBER(CN, trim_duration_us, "duration_us", 0, 1000, "duration reached by the hold's end, us"),
    NUMBER(CN, trim_current_ma, "current_ma", 0, 262, "current reached by the hold's end, mA"), LAST};
static const struct schema trim_schema = {
    .name = "trim", .size = sizeof(CN), .flow = true, .fields = trim_fields};

static bool in_settings(const PB *block)
{
    return block->settings.gaps == 0;
}
static bool block_regular(const void *object, const struct field *field)
{
    (void)field;
    return in_settings(object);
}
static bool trim_there(const void *object, const struct field *field)
{
    const CN *settings = &((const PB *)object)->settings;
    (void)field;
    return !isnan(settings->trim_duration_us) || !isnan(settings->trim_current_ma);
}
static bool ramp_there(const void *object, const struct field *field)
{
    return ((const struct ramp *)(const void *)((const char *)object + field->offset))->ms > 0;
}
static bool recount_there(const void *object, const struct field *field)
{
    (void)field;
    return !isnan(((const PB *)object)->recount.mean_n_first);
}

static const struct field block_fields[] = {
    COUNT_NEEDED(PB, first, "first", 1, 100000, "number of the first contraction"),
    COUNT_NEEDED(PB, count, "count", 1, 100000, "how many"),
    {.key = "gaps_ms",
     .type = FIELD_NUMBERS,
     AT(PB, settings.gaps_ms),
     .count = offsetof(PB, settings.gaps),
     .least = 1,
     .most = CONTRACTION_GAPS_MAX,
     .help = "free gaps, ms"},
    NUMBER(PB, settings.frequency_pps, "frequency_pps", 0.01, 1000, "pulses (pairs) a second"),
    {.key = "opening",
     .type = FIELD_CHOICE,
     AT(PB, settings.opening),
     .choices = opening_names,
     .fallback = 1,
     .there = block_regular,
     .help = "how a train begins"},
    {.key = "pattern",
     .type = FIELD_SWITCH,
     AT(PB, settings.pairs),
     .choices = pattern_names,
     .there = block_regular,
     .help = "singles or doublets"},
    {.key = "opening_gap_ms",
     .type = FIELD_NUMBER,
     AT(PB, settings.opening_gap_ms),
     .least = 1,
     .most = 60,
     .fallback = 5,
     .there = block_regular,
     .help = "gap inside an opening or a pair, ms"},
    NUMBER_NEEDED(PB, settings.duration_us, "duration_us", 1, 1000, "phase duration, us"),
    NUMBER_NEEDED(PB, settings.current_ma, "current_ma", 0, 262, "peak of a phase, mA"),
    {.key = "ramp_up",
     .type = FIELD_MAP,
     AT(PB, settings.ramp_up),
     .of = &ramp_schema,
     .there = ramp_there,
     .help = "{shape, ms, pieces}"},
    {.key = "hold_ms",
     .type = FIELD_NUMBER,
     AT(PB, settings.hold_ms),
     .least = 0,
     .most = 3600000,
     .fallback = ABSENT,
     .help = "length of the hold, ms"},
    {.key = "trim",
     .type = FIELD_MAP,
     .offset = offsetof(PB, settings),
     .of = &trim_schema,
     .has = NO_OFFSET,
     .there = trim_there,
     .help = "what the settings reach"},
    {.key = "ramp_down",
     .type = FIELD_MAP,
     AT(PB, settings.ramp_down),
     .of = &ramp_schema,
     .there = ramp_there,
     .help = "{shape, ms, pieces}"},
    NUMBER_OR(PB, settings.rest_ms, "rest_ms", 0, 36000000, 0, "rest after each, ms"),
    {.key = "warm_up",
     .type = FIELD_SWITCH,
     AT(PB, warm_up),
     .choices = no_yes,
     .help = "before the scored ones"},
    MAP_NEEDED(PB, why, "why", &why_schema, "why this block"),
    {.key = "recount",
     .type = FIELD_MAP,
     AT(PB, recount),
     .of = &recount_schema,
     .there = recount_there,
     .help = "found again from the final pulses"},
    LAST};

static void begin_block(void *object)
{
    PB *block = object;
    block->settings.ramp_up.ms = block->settings.ramp_down.ms = 0;
}

static enum status check_block(struct reading *reading, const char *path, void *object)
{
    PB *block = object;
    char key[256];
    block->settings.repeat = block->count;
    if (block->settings.gaps) return STATUS_OK;
    if (isnan(block->settings.frequency_pps))
        return schema_fault(reading, schema_path(path, "frequency_pps", key),
                            "is absent, a block needs it, or gaps_ms");
    if (isnan(block->settings.hold_ms))
        return schema_fault(reading, schema_path(path, "hold_ms", key), "is absent, a block needs it");
    return STATUS_OK;
}
static const struct schema block_schema = {.name = "a block",
                                           .size = sizeof(PB),
                                           .fields = block_fields,
                                           .begin = begin_block,
                                           .check = check_block};

#define WHOLE(M, KEY, MOST, SCALE, HELP)                                                                     \
    {                                                                                                        \
        .key = KEY, .type = FIELD_FIXED, AT(DL, M), .least = 0, .most = MOST, .scale = SCALE,                \
        .required = true, .help = HELP                                                                       \
    }
#define WHOLE64(M, KEY, MOST, SCALE, HELP)                                                                   \
    {                                                                                                        \
        .key = KEY, .type = FIELD_FIXED64, AT(DL, M), .least = 0, .most = MOST, .scale = SCALE,              \
        .required = true, .help = HELP                                                                       \
    }
/* the greatest values are the program's ceilings */
static const struct field limits_fields[] = {
    WHOLE(current_ua, "current_ma", 200, 1e3, "peak current, mA"),
    WHOLE(duration_us, "duration_us", 1000, 1, "phase duration, us"),
    WHOLE(charge_pc, "charge_uc", 100, 1e6, "phase charge, uC"),
    WHOLE(rms_ua, "rms_ma", 50, 1e3, "r.m.s. current over a second, mA"),
    WHOLE(rate, "frequency_pps", 120, 1, "pulses in a second"),
    {.key = "gap_us",
     .type = FIELD_FIXED,
     AT(DL, gap_us),
     .least = 2000,
     .most = 10000000,
     .scale = 1,
     .required = true,
     .help = "least gap, us"},
    WHOLE(energy_uj, "energy_mj", 300, 1e3, "pulse energy at 500 ohm, mJ"),
    WHOLE(voltage_mv, "voltage_v", 500, 1e3, "peak voltage, V"),
    WHOLE(load_ohm, "load_ohm", 20000, 1, "stated load, ohm"),
    WHOLE(net_dc_na, "net_dc_ua", 100, 1e3, "net direct current, uA"),
    WHOLE(mismatch_ppm, "mismatch_percent", 20, 1e4, "mismatch of the phases, %"),
    WHOLE(interphase_us, "interphase_us", 10000, 1, "between the phases, us"),
    WHOLE(recovery_us, "recovery_us", 1000000, 1, "recovery phase, us; 0: symmetric"),
    WHOLE64(on_us, "on_ms", 600000, 1e3, "longest train, ms"),
    WHOLE(duty_permille, "duty_percent", 100, 10, "on-time over session time, %"),
    WHOLE(first_pc, "first_uc", 100, 1e6, "charge that may be given at once, uC"),
    WHOLE(slew_pc_per_ms, "slew_uc_per_s", 1000, 1e3, "rise of charge, uC/s"),
    WHOLE(slew_memory_ms, "slew_memory_ms", 10000, 1, "memory of charges given, ms"),
    WHOLE(step_pc, "step_uc", 100, 1e6, "charge of one step, uC"),
    WHOLE64(session_us, "session_ms", 10800000, 1e3, "longest session, ms"),
    WHOLE64(session_pulses, "session_pulses", 1000000, 1, "most pulses"),
    WHOLE64(session_charge_pc, "session_charge_mc", 20000, 1e9, "most charge, mC"),
    LAST};
static const struct schema limits_schema = {
    .name = "limits", .size = sizeof(DL), .flow = true, .fields = limits_fields};

static const char *whose(const char *text, size_t length)
{
    static const char *const words[] = {"program", "stimulator", "person", NULL};
    for (int i = 0; words[i]; i++)
        if (strlen(words[i]) == length && memcmp(words[i], text, length) == 0) return words[i];
    return NULL;
}

static enum status read_sources(struct reading *reading, struct fy_node *node, const char *path, void *object,
                                const struct field *field)
{
    CH *channel = object;
    char key_path[256];
    (void)field;
    if (!fy_node_is_mapping(node))
        return schema_fault(reading, path, "is no map, may hold {current: person, ...}");
    void *previous = NULL;
    struct fy_node_pair *pair;
    while ((pair = fy_node_mapping_iterate(node, &previous)) != NULL) {
        size_t length = 0, value_length = 0;
        const char *key = fy_node_get_scalar(fy_node_pair_key(pair), &length);
        const char *value =
            fy_node_pair_value(pair) ? fy_node_get_scalar(fy_node_pair_value(pair), &value_length) : NULL;
        char word[64];
        (void)snprintf(word, sizeof word, "%.*s", (int)(length > 60 ? 60 : length), key ? key : "?");
        schema_note(reading, schema_path(path, word, key_path), fy_node_pair_key(pair));
        int figure = DOSE_NONE + 1;
        while (figure < DOSE_FIGURES && strcmp(figure_keys[figure], word) != 0) figure++;
        if (figure == DOSE_FIGURES || !value || !whose(value, value_length))
            return schema_fault(
                reading, key_path,
                "is no figure with its source, may hold such as current: person | stimulator | program");
        channel->limit_source[figure] = whose(value, value_length);
    }
    return STATUS_OK;
}

static void print_sources(const void *object, const struct field *field, struct text_out *out, int indent)
{
    const CH *channel = object;
    bool some = false;
    (void)field;
    (void)indent;
    text_out_print(out, "{");
    for (int figure = DOSE_NONE + 1; figure < DOSE_FIGURES; figure++) {
        if (!channel->limit_source[figure]) continue;
        text_out_print(out, "%s%s: %s", some ? ", " : "", figure_keys[figure], channel->limit_source[figure]);
        some = true;
    }
    text_out_print(out, "}");
}

static const struct field trial_fields[] = {
    CHOICE_NEEDED(TR, shape, "shape", ramp_names, "shape of the ramp"),
    NUMBER(TR, ms, "ms", -HUGE_VAL, HUGE_VAL, "best length of this shape, ms"),
    NUMBER(TR, rise_ms, "rise_ms", -HUGE_VAL, HUGE_VAL, "rise, ms"),
    NUMBER(TR, overshoot_percent, "overshoot_percent", -HUGE_VAL, HUGE_VAL, "overshoot, %"),
    NUMBER(TR, outside_n_s, "outside_n_s", -HUGE_VAL, HUGE_VAL, "force-time integral outside the hold, N s"),
    SWITCH(TR, chosen, "chosen", no_yes, "the one that was taken"),
    LAST};
static const struct schema trial_schema = {
    .name = "a ramp tried", .size = sizeof(TR), .flow = true, .fields = trial_fields};

static bool demand_there(const void *object, const struct field *field)
{
    return ((const struct demand *)(const void *)((const char *)object + field->offset))->contractions > 0;
}

static const struct field channel_fields[] = {
    COUNT_NEEDED(CH, channel, "channel", 1, STIMULATOR_CHANNELS_MAX, "the stimulator's channel"),
    CODE_NEEDED(CH, muscle, "muscle", "the muscle it drives"),
    CODE(CH, side, "side", "left or right"),
    NUMBER(CH, pad_cm2, "pad_cm2", 0, 2000, "area of the pad, cm2"),
    NUMBER(CH, return_pad_cm2, "return_pad_cm2", 0, 2000, "area of the return pad, cm2"),
    MAP_NEEDED(CH, recruitment, "recruitment", &recruitment_schema, "the law that was planned with"),
    MAP_NEEDED(CH, limits, "limits", &limits_schema, "the effective limits"),
    {.key = "limit_sources",
     .type = FIELD_OWN,
     .offset = 0,
     .has = NO_OFFSET,
     .read = read_sources,
     .print = print_sources,
     .help = "whose each limit is"},
    NUMBER(CH, force_cap_n, "force_cap_n", 0, 100000, "greatest force, N"),
    NUMBER(CH, force_edge_n, "force_edge_n", -HUGE_VAL, HUGE_VAL, "upper 95 % edge of the peak, N"),
    NUMBER(CH, comfort_ma, "comfort_ma", 0, 262, "greatest comfortable current, mA"),
    NUMBER_OR(CH, start_ms, "start_ms", 0, 36000000, 0, "first pulse from the session's start, ms"),
    {.key = "demand",
     .type = FIELD_MAP,
     AT(CH, demand),
     .of = &demand_schema,
     .there = demand_there,
     .help = "what was asked of this muscle"},
    NUMBER(CH, target_n, "target_n", 0, 100000, "target, N"),
    {.key = "ramps_tried",
     .type = FIELD_ARRAY,
     AT(CH, ramp_trial),
     .count = offsetof(CH, ramp_trials),
     .of = &trial_schema,
     .least = 0,
     .most = PLAN_RAMP_TRIALS_MAX,
     .help = "best of each shape"},
    LIST_NEEDED(CH, block, blocks, "blocks", &block_schema, 0, 100000, "equal contractions, in order"),
    LAST};
static enum status check_channel(struct reading *reading, const char *path, void *object)
{
    const CH *channel = object;
    char key[256], block[64];
    unsigned next = 1;
    for (size_t i = 0; i < channel->blocks; i++) {
        (void)snprintf(block, sizeof block, "blocks[%zu].first", i);
        if (channel->block[i].first != next)
            return schema_fault(reading, schema_path(path, block, key),
                                "holds %u, may hold %u: blocks follow each other", channel->block[i].first,
                                next);
        next += channel->block[i].count;
        if (next > 100001)
            return schema_fault(reading, schema_path(path, block, key),
                                "brings the plan to %u contractions, may have 100000", next - 1);
    }
    return STATUS_OK;
}
static const struct schema channel_schema = {
    .name = "a channel", .size = sizeof(CH), .fields = channel_fields, .check = check_channel};

static const struct field figure_fields[] = {
    COUNT_NEEDED(LF, channel, "channel", 1, STIMULATOR_CHANNELS_MAX, "channel"),
    CHOICE_NEEDED(LF, figure, "figure", figure_keys, "what was reckoned"),
    NUMBER_NEEDED(LF, value, "value", -HUGE_VAL, HUGE_VAL, "greatest value"),
    NUMBER_NEEDED(LF, limit, "limit", -HUGE_VAL, HUGE_VAL, "limit"),
    NUMBER(LF, share, "share", -HUGE_VAL, HUGE_VAL, "share of the limit"),
    NUMBER_NEEDED(LF, at_ms, "at_ms", -HUGE_VAL, HUGE_VAL, "when, ms"),
    CODE_NEEDED(LF, source, "source", "whose limit"),
    SWITCH(LF, attention, "attention", no_yes, "needs the operator's attention"),
    LAST};
static const struct schema figure_schema = {
    .name = "a figure", .size = sizeof(LF), .flow = true, .fields = figure_fields};
static const struct field shown_fields[] = {
    COUNT_NEEDED(LS, channel, "channel", 1, STIMULATOR_CHANNELS_MAX, "channel"),
    CODE_NEEDED(LS, name, "name", "what was reckoned"),
    TEXT(LS, unit, "unit", "unit"),
    NUMBER_NEEDED(LS, value, "value", -HUGE_VAL, HUGE_VAL, "value"),
    NUMBER(LS, attention_above, "attention_above", -HUGE_VAL, HUGE_VAL, "needs attention above this"),
    SWITCH(LS, attention, "attention", no_yes, "needs the operator's attention"),
    LAST};
static const struct schema shown_schema = {
    .name = "a shown figure", .size = sizeof(LS), .flow = true, .fields = shown_fields};
static bool pulses_there(const void *object, const struct field *field)
{
    (void)object;
    (void)field;
    return true;
}
typedef struct ledger LG;
static const struct field ledger_fields[] = {
    SWITCH(LG, within, "within", no_yes, "every limit kept"),
    NUMBER_OR(LG, charge_total_uc, "charge_total_uc", 0, 1e12, 0, "charge of all first phases, uC"),
    NUMBER_OR(LG, session_ms, "session_ms", 0, 1e12, 0, "to the last pulse, ms"),
    {.key = "pulses",
     .type = FIELD_FIXED64,
     AT(LG, pulses),
     .least = 0,
     .most = 1e9,
     .scale = 1,
     .there = pulses_there,
     .help = "single pulses"},
    {.key = "figures",
     .type = FIELD_LIST,
     AT(LG, figure),
     .count = offsetof(LG, figures),
     .of = &figure_schema,
     .least = 0,
     .most = 1000,
     .help = "figures that limit"},
    {.key = "shown",
     .type = FIELD_LIST,
     AT(LG, shown_figure),
     .count = offsetof(LG, shown),
     .of = &shown_schema,
     .least = 0,
     .most = 1000,
     .help = "figures that are shown"},
    LAST};
static const struct schema ledger_schema = {
    .name = "the ledger", .size = sizeof(LG), .fields = ledger_fields};

static const struct field would_fields[] = {NUMBER(PN, would_work.largest_target_n, "largest_target_n",
                                                   -HUGE_VAL, HUGE_VAL, "largest target that works, N"),
                                            NUMBER(PN, would_work.longest_hold_ms, "longest_hold_ms",
                                                   -HUGE_VAL, HUGE_VAL, "longest hold that works, ms"),
                                            COUNT_OR(PN, would_work.most_contractions, "most_contractions", 0,
                                                     100000, 0, "most contractions that work"),
                                            LAST};
static const struct schema would_schema = {
    .name = "would_work", .size = sizeof(PN), .flow = true, .fields = would_fields};
static bool would_there(const void *object, const struct field *field)
{
    const PN *plan = object;
    (void)field;
    return !isnan(plan->would_work.largest_target_n) || !isnan(plan->would_work.longest_hold_ms) ||
           plan->would_work.most_contractions > 0;
}

/* notes: lines of text in an array in place */
static enum status read_notes(struct reading *reading, struct fy_node *node, const char *path, void *object,
                              const struct field *field)
{
    PN *plan = object;
    (void)field;
    if (!fy_node_is_sequence(node) || fy_node_sequence_item_count(node) > PLAN_NOTES_MAX)
        return schema_fault(reading, path, "is no list of at most %d lines", PLAN_NOTES_MAX);
    void *previous = NULL;
    struct fy_node *item;
    while ((item = fy_node_sequence_iterate(node, &previous)) != NULL) {
        const enum status status =
            schema_read_text(reading, item, path, plan->note[plan->notes], sizeof plan->note[0]);
        if (status != STATUS_OK) return status;
        plan->notes++;
    }
    return STATUS_OK;
}
static void print_notes(const void *object, const struct field *field, struct text_out *out, int indent)
{
    const PN *plan = object;
    (void)field;
    for (size_t i = 0; i < plan->notes; i++) {
        text_out_print(out, "\n%*s- ", indent, "");
        schema_print_text(out, plan->note[i]);
    }
}
static bool period_there(const void *object, const struct field *field)
{
    (void)field;
    return ((const PN *)object)->common_period_us > 0;
}

static const struct field plan_fields[] = {
    CODE_NEEDED(PN, person, "person", "a code, no name"),
    TEXT(PN, goal, "goal", "a line for the sheet"),
    TEXT(PN, verdict, "verdict", "in one line"),
    {.key = "feasible",
     .type = FIELD_SWITCH,
     AT(PN, feasible),
     .choices = no_yes,
     .help = "every contraction as asked"},
    COUNT_OR(PN, contractions_asked, "contractions_asked", 0, 100000, 0, "scored contractions asked for"),
    COUNT_OR(PN, contractions_met, "contractions_met", 0, 100000, 0,
             "scored contractions before the first miss"),
    COUNT_OR(PN, first_miss, "first_miss", 0, 100000, 0, "number of the first that misses; 0: none"),
    {.key = "first_miss_why",
     .type = FIELD_MAP,
     AT(PN, first_miss_why),
     .of = &why_schema,
     .help = "why it misses"},
    {.key = "binding", .type = FIELD_MAP, AT(PN, binding), .of = &why_schema, .help = "what ends the plan"},
    NUMBER(PN, capacity_end, "capacity_end", -HUGE_VAL, HUGE_VAL, "at the end"),
    NUMBER(PN, force_remaining_50_end, "force_remaining_50_end", -HUGE_VAL, HUGE_VAL, "at the end"),
    NUMBER(PN, charge_total_uc, "charge_total_uc", -HUGE_VAL, HUGE_VAL, "charge of all first phases, uC"),
    NUMBER(PN, ensemble_met_share, "ensemble_met_share", -HUGE_VAL, HUGE_VAL,
           "share of the ensemble that meets the whole demand"),
    {.key = "would_work",
     .type = FIELD_MAP,
     .offset = 0,
     .of = &would_schema,
     .has = NO_OFFSET,
     .there = would_there,
     .help = "what would work instead"},
    CODE(PN, as_found, "as_found", "how comfort was found: single or train"),
    {.key = "notes",
     .type = FIELD_OWN,
     .offset = 0,
     .has = offsetof(PN, notes),
     .read = read_notes,
     .print = print_notes,
     .help = "lines for a person"},
    TEXT(PN, program, "program", "name and version that made it"),
    TEXT(PN, profile_digest, "profile_digest", "BLAKE2b-256 of the profile"),
    TEXT(PN, demand_digest, "demand_digest", "BLAKE2b-256 of the demand"),
    TEXT(PN, stimulator_digest, "stimulator_digest", "BLAKE2b-256 of the stimulator's document"),
    {.key = "demand",
     .type = FIELD_MAP,
     AT(PN, demand),
     .of = &demand_schema,
     .there = demand_there,
     .help = "what was asked"},
    NUMBER(PN, target_n, "target_n", 0, 100000, "target, N"),
    {.key = "common_period_us",
     .type = FIELD_FIXED,
     AT(PN, common_period_us),
     .least = 1,
     .most = 10000000,
     .scale = 1,
     .there = period_there,
     .help = "of channels that take turns, us"},
    MAP_NEEDED(PN, stimulator, "stimulator", &stimulator_schema, "what it is planned for"),
    LIST_NEEDED(PN, channel, channels, "channels", &channel_schema, 1, STIMULATOR_CHANNELS_MAX,
                "what each channel gives"),
    {.key = "ledger", .type = FIELD_MAP, AT(PN, ledger), .of = &ledger_schema, .help = "the dose"},
    LAST};

static enum status check_plan(struct reading *reading, const char *path, void *object)
{
    const PN *plan = object;
    char key[64];
    (void)path;
    for (size_t i = 0; i < plan->channels; i++) {
        (void)snprintf(key, sizeof key, "channels[%zu].channel", i);
        if (plan->channel[i].channel > plan->stimulator.channels)
            return schema_fault(reading, key, "holds %u, the stimulator has %u", plan->channel[i].channel,
                                plan->stimulator.channels);
        for (size_t j = 0; j < i; j++)
            if (plan->channel[i].channel == plan->channel[j].channel)
                return schema_fault(reading, key, "holds %u a second time, each channel may stand once",
                                    plan->channel[i].channel);
    }
    return STATUS_OK;
}
const struct schema plan_schema = {
    .name = "a plan", .size = sizeof(PN), .fields = plan_fields, .check = check_plan};

enum status plan_parse(const struct document_bytes *bytes, struct plan *plan, struct message *why)
{
    return schema_parse(&plan_schema, document_kind_format(DOCUMENT_PLAN), bytes, plan, why);
}

enum status plan_load(const char *path, struct plan *plan, struct message *why)
{
    struct document_bytes bytes;
    enum status status = document_read_bytes(path, &bytes, why);
    if (status != STATUS_OK) return status;
    status = plan_parse(&bytes, plan, why);
    document_bytes_free(&bytes);
    return status;
}

void plan_print(const struct plan *plan, struct text_out *out)
{
    schema_print(&plan_schema, document_kind_format(DOCUMENT_PLAN), plan, out);
}

void plan_free(struct plan *plan)
{
    schema_free(&plan_schema, plan);
}
