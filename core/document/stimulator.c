/* Stimulator documents. The goal of this code: what a device can give, in whole steps of its own. */
#include "core/document/stimulator.h"

#include "core/document/fields.h"
#include "core/document/schemas.h"
#include <libfyaml.h>
#include <stdio.h>
#include <string.h>

typedef struct stimulator SM;
typedef struct stepped ST;

static const char *const phases[] = {"symmetric", "capacitor-balanced", NULL};
static const char *const overlaps[] = {"one-at-a-time", "independent", NULL};

#define STEPPED(NAME, MOST, UNIT)                                                                            \
    static const struct field NAME##_fields[] = {                                                            \
        NUMBER_NEEDED(ST, from, "from", 0, MOST, "least value, " UNIT),                                      \
        NUMBER_NEEDED_ABOVE(ST, to, "to", 0, MOST, "greatest value, " UNIT),                                 \
        NUMBER_NEEDED_ABOVE(ST, step, "step", 0, MOST, "step, " UNIT), LAST};                                \
    static const struct schema NAME##_schema = {.name = "a range with steps",                                \
                                                .size = sizeof(ST),                                          \
                                                .flow = true,                                                \
                                                .fields = NAME##_fields,                                     \
                                                .check = check_stepped}

static enum status check_stepped(struct reading *reading, const char *path, void *object)
{
    const ST *range = object;
    if (range->from > range->to)
        return schema_fault(reading, path, "holds from %g to %g, may hold from at most to", range->from,
                            range->to);
    const double steps = (range->to - range->from) / range->step;
    if (fabs(steps - round(steps)) > 1e-6 * (1 + steps))
        return schema_fault(reading, path,
                            "holds steps of %g that do not lead from %g to %g, may hold steps that do",
                            range->step, range->from, range->to);
    return STATUS_OK;
}

/* The device is asked in uA and us: a step finer than that can not be given. */
STEPPED(current, 262, "mA");
STEPPED(duration, 1000, "us");
STEPPED(frequency, 1000, "pps");

static enum status read_returns(struct reading *reading, struct fy_node *node, const char *path, void *object,
                                const struct field *field)
{
    SM *stimulator = object;
    char item_path[256];
    (void)field;
    if (!fy_node_is_sequence(node) || fy_node_sequence_item_count(node) > STIMULATOR_RETURNS_MAX)
        return schema_fault(reading, path,
                            "is no list of at most %d lists of channels, may hold [[1, 2], [3, 4]]",
                            STIMULATOR_RETURNS_MAX);
    void *previous = NULL;
    struct fy_node *group;
    while ((group = fy_node_sequence_iterate(node, &previous)) != NULL) {
        const size_t g = stimulator->returns;
        (void)snprintf(item_path, sizeof item_path, "%.200s[%zu]", path, g);
        schema_note(reading, item_path, group);
        const int count = fy_node_is_sequence(group) ? fy_node_sequence_item_count(group) : -1;
        if (count < 1 || count > STIMULATOR_CHANNELS_MAX)
            return schema_fault(reading, item_path, "is no list of 1 to %d channels",
                                STIMULATOR_CHANNELS_MAX);
        void *previous_channel = NULL;
        struct fy_node *item;
        size_t n = 0;
        while ((item = fy_node_sequence_iterate(group, &previous_channel)) != NULL) {
            double channel = 0;
            const enum status status =
                schema_read_number(reading, item, item_path, 1, STIMULATOR_CHANNELS_MAX, false, &channel);
            if (status != STATUS_OK) return status;
            if (fabs(channel - round(channel)) > 0)
                return schema_fault(reading, item_path, "holds channel %g, may hold whole numbers", channel);
            stimulator->return_group[g].channel[n++] = (unsigned)channel;
        }
        stimulator->return_group[g].channels = n;
        stimulator->returns++;
    }
    return STATUS_OK;
}

static void print_returns(const void *object, const struct field *field, struct text_out *out, int indent)
{
    const SM *stimulator = object;
    (void)field;
    (void)indent;
    text_out_print(out, "[");
    for (size_t g = 0; g < stimulator->returns; g++) {
        text_out_print(out, "%s[", g ? ", " : "");
        for (size_t i = 0; i < stimulator->return_group[g].channels; i++)
            text_out_print(out, "%s%u", i ? ", " : "", stimulator->return_group[g].channel[i]);
        text_out_print(out, "]");
    }
    text_out_print(out, "]");
}

static const struct field stimulator_fields[] = {
    CODE_NEEDED(SM, name, "name", "a word for this device"),
    CODE(SM, unit, "unit", "the very device, as it says itself; asked at signing where absent"),
    COUNT_NEEDED(SM, channels, "channels", 1, STIMULATOR_CHANNELS_MAX, "how many channels it has"),
    MAP_NEEDED(SM, current_ma, "current_ma", &current_schema, "{from, to, step} of the peak current, mA"),
    MAP_NEEDED(SM, duration_us, "duration_us", &duration_schema,
               "{from, to, step} of the phase duration, us"),
    MAP_NEEDED(SM, frequency_pps, "frequency_pps", &frequency_schema, "{from, to, step} of pulses a second"),
    NUMBER_NEEDED(SM, gap_us_min, "gap_us_min", 100, 1000000, "least time between two pulses, us"),
    SWITCH_NEEDED(SM, capacitor_balanced, "phases", phases, "how the second phase balances the first"),
    NUMBER_ABOVE(SM, recovery_us, "recovery_us", 0, 1000000,
                 "length of the recovery phase, us, with capacitor-balanced"),
    NUMBER_NEEDED(SM, interphase_us, "interphase_us", 0, 10000, "between the phases, us"),
    NUMBER_OR(SM, mismatch_percent, "mismatch_percent", 0, 20, 1,
              "charge that the second phase may leave, %"),
    {.key = "returns",
     .type = FIELD_OWN,
     .offset = 0,
     .has = offsetof(SM, returns),
     .read = read_returns,
     .print = print_returns,
     .help = "channels that share a return electrode, [[1, 2], [3, 4]]"},
    SWITCH(SM, independent, "overlap", overlaps, "whether channels may pulse at the same time"),
    COUNT_OR(SM, queue_segments, "queue_segments", 4, 4096, 128, "segments it can hold"),
    NUMBER_NEEDED_ABOVE(SM, compliance_v, "compliance_v", 0, 500, "greatest voltage, V"),
    NUMBER_NEEDED_ABOVE(SM, load_ohm, "load_ohm", 0, 20000, "load that voltage is reckoned with, ohm"),
    COUNT_OR(SM, baud, "baud", 57600, 1000000, 115200, "speed of the line"),
    LAST};

static enum status check_returns(struct reading *reading, const char *path, const SM *stimulator)
{
    unsigned seen = 0;
    char key[256];
    for (size_t g = 0; g < stimulator->returns; g++) {
        for (size_t i = 0; i < stimulator->return_group[g].channels; i++) {
            const unsigned channel = stimulator->return_group[g].channel[i];
            char list[32];
            (void)snprintf(list, sizeof list, "returns[%zu]", g);
            if (channel > stimulator->channels)
                return schema_fault(reading, schema_path(path, list, key),
                                    "holds channel %u, may hold 1 to %u", channel, stimulator->channels);
            if (seen & 1u << channel)
                return schema_fault(reading, schema_path(path, list, key),
                                    "holds channel %u a second time, may hold it once", channel);
            seen |= 1u << channel;
        }
    }
    return STATUS_OK;
}

static bool whole(double value)
{
    return fabs(value - round(value)) < 1e-9 * (1 + fabs(value));
}

static enum status check_stimulator(struct reading *reading, const char *path, void *object)
{
    const SM *stimulator = object;
    char key[256];
    if (!whole(stimulator->current_ma.from * 1e3) || !whole(stimulator->current_ma.step * 1e3))
        return schema_fault(reading, schema_path(path, "current_ma", key),
                            "holds steps finer than 0.001 mA, may hold whole uA");
    if (!whole(stimulator->duration_us.from) || !whole(stimulator->duration_us.step))
        return schema_fault(reading, schema_path(path, "duration_us", key),
                            "holds steps finer than 1 us, may hold whole us");
    if (!(stimulator->frequency_pps.from > 0))
        return schema_fault(reading, schema_path(path, "frequency_pps.from", key),
                            "holds %g, may hold a number above 0", stimulator->frequency_pps.from);
    if (stimulator->capacitor_balanced && isnan(stimulator->recovery_us))
        return schema_fault(reading, schema_path(path, "recovery_us", key),
                            "is absent, phases: capacitor-balanced needs it");
    if (!stimulator->capacitor_balanced && !isnan(stimulator->recovery_us))
        return schema_fault(reading, schema_path(path, "recovery_us", key),
                            "does not go with phases: symmetric");
    return check_returns(reading, path, stimulator);
}
const struct schema stimulator_schema = {
    .name = "a stimulator", .size = sizeof(SM), .fields = stimulator_fields, .check = check_stimulator};

enum status stimulator_parse(const struct document_bytes *bytes, struct stimulator *stimulator,
                             struct message *why)
{
    return schema_parse(&stimulator_schema, document_kind_format(DOCUMENT_STIMULATOR), bytes, stimulator,
                        why);
}

enum status stimulator_load(const char *path, struct stimulator *stimulator, struct message *why)
{
    struct document_bytes bytes;
    enum status status = document_read_bytes(path, &bytes, why);
    if (status != STATUS_OK) return status;
    status = stimulator_parse(&bytes, stimulator, why);
    document_bytes_free(&bytes);
    return status;
}

void stimulator_print(const struct stimulator *stimulator, struct text_out *out)
{
    schema_print(&stimulator_schema, document_kind_format(DOCUMENT_STIMULATOR), stimulator, out);
}

struct train_grid stimulator_grid(const struct stimulator *stimulator)
{
    return (struct train_grid){.current_from_ua = (uint32_t)lround(stimulator->current_ma.from * 1e3),
                               .current_step_ua = (uint32_t)lround(stimulator->current_ma.step * 1e3),
                               .duration_from_us = (uint16_t)lround(stimulator->duration_us.from),
                               .duration_step_us = (uint16_t)lround(stimulator->duration_us.step)};
}

struct dose_device stimulator_dose_device(const struct stimulator *stimulator)
{
    return (struct dose_device){.current_to_ma = stimulator->current_ma.to,
                                .duration_to_us = stimulator->duration_us.to,
                                .frequency_to_pps = stimulator->frequency_pps.to,
                                .gap_us_min = stimulator->gap_us_min,
                                .interphase_us = stimulator->interphase_us,
                                .recovery_us = stimulator->recovery_us,
                                .mismatch_percent = stimulator->mismatch_percent,
                                .compliance_v = stimulator->compliance_v,
                                .load_ohm = stimulator->load_ohm,
                                .current_step_ma = stimulator->current_ma.step,
                                .duration_step_us = stimulator->duration_us.step,
                                .capacitor_balanced = stimulator->capacitor_balanced};
}
