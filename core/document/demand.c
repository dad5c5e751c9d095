/* Demand documents. The goal of this code: what force is wanted, with every default stated in one table. */
#include "core/document/demand.h"

#include "core/document/fields.h"
#include "core/document/schemas.h"
#include <string.h>

typedef struct demand DM;

static const char *const kinds[] = {"hold", NULL};
const char *const opening_names[] = {"", "single", "doublet", "triplet", NULL};
const char *const pattern_names[] = {"singles", "doublets", NULL};
const char *const ramp_names[] = {"linear", "raised-cosine", "exponential", NULL};
static const char *const knobs[] = {"frequency", "duration", "current", NULL};
static const char *const preferences[] = {"endurance", "charge", "smoothness", NULL};
static const char *const target_keys[] = {"target_n", "target_nm", "target_percent"};

static enum demand_target target_of(const struct field *field)
{
    for (int i = 0; i < 3; i++)
        if (strcmp(field->key, target_keys[i]) == 0) return (enum demand_target)i;
    return TARGET_N;
}

static enum status read_target(struct reading *reading, struct fy_node *node, const char *path, void *object,
                               const struct field *field)
{
    DM *demand = object;
    if (!isnan(demand->target))
        return schema_fault(reading, path, "stands beside %s, a demand may hold one target",
                            target_keys[demand->target_kind]);
    demand->target_kind = target_of(field);
    return schema_read_number(reading, node, path, field->least, field->most, true, &demand->target);
}

static bool target_there(const void *object, const struct field *field)
{
    const DM *demand = object;
    return !isnan(demand->target) && demand->target_kind == target_of(field);
}

static void print_target(const void *object, const struct field *field, struct text_out *out, int indent)
{
    char number[32];
    (void)field;
    (void)indent;
    text_out_print(out, "%s", number_text(((const DM *)object)->target, number));
}

#define TARGET(KEY, MOST, HELP)                                                                              \
    {                                                                                                        \
        .key = KEY, .type = FIELD_OWN, .offset = 0, .has = NO_OFFSET, .least = 0, .most = MOST,              \
        .read = read_target, .print = print_target, .there = target_there, .help = HELP                      \
    }

static const struct field stop_if_fields[] = {
    NUMBER_OR(DM, stop_if.over_percent, "over_percent", 1, 1000, 30,
              "stop where a contraction is this much above the prediction, %"),
    NUMBER_OR(DM, stop_if.under_percent, "under_percent", 1, 100, 30, "stop where it is this much below, %"),
    COUNT_OR(DM, stop_if.contractions, "contractions", 1, 100, 3, "so many in a row"), LAST};
static const struct schema stop_if = {
    .name = "stop_if", .size = sizeof(DM), .flow = true, .fields = stop_if_fields};

static bool goal_there(const void *object, const struct field *field)
{
    (void)field;
    return ((const DM *)object)->goal[0] != '\0';
}

static enum status read_kind(struct reading *reading, struct fy_node *node, const char *path, void *object,
                             const struct field *field)
{
    char kind[NAME_SIZE];
    (void)object;
    (void)field;
    const enum status status = schema_read_text(reading, node, path, kind, sizeof kind);
    if (status != STATUS_OK) return status;
    return strcmp(kind, kinds[0]) == 0 ? STATUS_OK
                                       : schema_fault(reading, path, "holds %s, may hold hold", kind);
}

static void print_kind(const void *object, const struct field *field, struct text_out *out, int indent)
{
    (void)object;
    (void)field;
    (void)indent;
    text_out_print(out, "%s", kinds[0]);
}

static const struct field demand_fields[] = {
    {.key = "kind",
     .type = FIELD_OWN,
     .offset = 0,
     .has = NO_OFFSET,
     .required = true,
     .read = read_kind,
     .print = print_kind,
     .help = "hold"},
    CODE_NEEDED(DM, muscle, "muscle", "a muscle of the profile"),
    {.key = "goal",
     .type = FIELD_TEXT,
     AT(DM, goal),
     SIZE_OF(DM, goal),
     .there = goal_there,
     .help = "a line for the sheet"},
    TARGET("target_n", 10000, "force wanted in the hold, N"),
    TARGET("target_nm", 1000, "torque wanted in the hold, N m"),
    TARGET("target_percent", 100, "of the greatest fused force within the limits, %"),
    NUMBER_OR(DM, tolerance_percent, "tolerance_percent", 0.1, 50, 5, "hold mean against target, %"),
    NUMBER_OR(DM, ripple_percent_max, "ripple_percent_max", 0.1, 200, 10,
              "most ripple in a period of the hold, %"),
    NUMBER_OR(DM, droop_percent_max, "droop_percent_max", 0.1, 200, 5,
              "most change from the first to the last quarter, %"),
    NUMBER_OR(DM, rise_ms_max, "rise_ms_max", 10, 60000, 1000, "latest rise, ms"),
    NUMBER_OR(DM, overshoot_percent_max, "overshoot_percent_max", 0.1, 200, 10, "most above the target, %"),
    NUMBER_NEEDED(DM, hold_ms, "hold_ms", 50, 600000, "length of the hold, ms"),
    NUMBER_OR(DM, release_ms, "release_ms", 0, 60000, 500, "length of the ramp down, ms"),
    NUMBER_NEEDED(DM, rest_ms, "rest_ms", 10, 3600000, "from the last pulse to the next first pulse, ms"),
    NUMBER_OR(DM, start_ms, "start_ms", 0, 3600000, 0,
              "first pulse of this muscle from the session's start, ms"),
    COUNT_NEEDED(DM, contractions, "contractions", 1, 10000, "how many contractions"),
    COUNT_OR(DM, warm_up, "warm_up", 0, 1000, 0, "contractions before the scored ones"),
    CHOICES_OR(DM, opening, "opening", opening_names, 1u << 1, "what the planner may begin a train with"),
    CHOICES_OR(DM, pattern, "pattern", pattern_names, 1u << 0, "singles, or doublets throughout"),
    CHOICES_OR(DM, ramp, "ramp", ramp_names, 7, "shapes the planner may use"),
    {.key = "vary",
     .type = FIELD_BITS,
     AT(DM, vary),
     .choices = knobs,
     .fallback = VARY_FREQUENCY | VARY_DURATION | VARY_CURRENT,
     .help = "what the planner may change"},
    {.key = "frequency_pps",
     .type = FIELD_RANGE,
     AT(DM, frequency_pps),
     .least = 0,
     .most = 1000,
     .above_least = true,
     .help = "fixed, or {from, to}, pulses a second"},
    {.key = "duration_us",
     .type = FIELD_RANGE,
     AT(DM, duration_us),
     .least = 0,
     .most = 1000,
     .above_least = true,
     .help = "fixed, or {from, to}, us"},
    {.key = "current_ma",
     .type = FIELD_RANGE,
     AT(DM, current_ma),
     .least = 0,
     .most = 200,
     .above_least = true,
     .help = "fixed, or {from, to}, mA"},
    CHOICE_OR(DM, prefer, "prefer", preferences, PREFER_ENDURANCE, "what comes first among plans that do"),
    {.key = "stop_if",
     .type = FIELD_MAP,
     .offset = 0,
     .of = &stop_if,
     .has = offsetof(DM, has_stop_if),
     .help = "when to stop; printed on the sheet, not yet acted on by the host"},
    LAST};

static void begin_demand(void *object)
{
    ((DM *)object)->target = ABSENT;
}

static enum status check_demand(struct reading *reading, const char *path, void *object)
{
    const DM *demand = object;
    char key[256];
    if (isnan(demand->target))
        return schema_fault(reading, schema_path(path, "target_n", key),
                            "is absent, a demand may hold one of target_n, target_nm, target_percent");
    if (demand->contractions + demand->warm_up > 10000)
        return schema_fault(reading, schema_path(path, "warm_up", key),
                            "makes %u contractions in all, may make 10000",
                            demand->contractions + demand->warm_up);
    return STATUS_OK;
}

const struct schema demand_schema = {.name = "a demand",
                                     .size = sizeof(DM),
                                     .fields = demand_fields,
                                     .begin = begin_demand,
                                     .check = check_demand};

enum status demand_parse(const struct document_bytes *bytes, struct demand *demand, struct message *why)
{
    return schema_parse(&demand_schema, document_kind_format(DOCUMENT_DEMAND), bytes, demand, why);
}

enum status demand_load(const char *path, struct demand *demand, struct message *why)
{
    struct document_bytes bytes;
    enum status status = document_read_bytes(path, &bytes, why);
    if (status != STATUS_OK) return status;
    status = demand_parse(&bytes, demand, why);
    document_bytes_free(&bytes);
    return status;
}

void demand_print(const struct demand *demand, struct text_out *out)
{
    schema_print(&demand_schema, document_kind_format(DOCUMENT_DEMAND), demand, out);
}

void demand_free(struct demand *demand)
{
    schema_free(&demand_schema, demand);
}
