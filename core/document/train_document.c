/* Train documents: contractions as a person writes them, regular or by free gaps. */
#include "core/document/train_document.h"

#include "core/document/fields.h"
#include "core/document/schemas.h"
#include <stdio.h>

typedef struct contraction CN;
typedef struct ramp RP;
typedef struct ramp_piece PC;

static const struct field piece_fields[] = {{.key = "pulses",
                                             .type = FIELD_FIXED,
                                             AT(PC, pulses),
                                             .least = 1,
                                             .most = 65535,
                                             .scale = 1,
                                             .required = true,
                                             .help = "single pulses"},
                                            {.key = "from_us",
                                             .type = FIELD_FIXED,
                                             AT(PC, from_us),
                                             .least = 0,
                                             .most = 65535,
                                             .scale = 1,
                                             .required = true,
                                             .help = "first duration, us"},
                                            {.key = "to_us",
                                             .type = FIELD_FIXED,
                                             AT(PC, to_us),
                                             .least = 0,
                                             .most = 65535,
                                             .scale = 1,
                                             .required = true,
                                             .help = "last duration, us"},
                                            {.key = "from_ma",
                                             .type = FIELD_FIXED,
                                             AT(PC, from_ua),
                                             .least = 0,
                                             .most = 262,
                                             .scale = 1000,
                                             .required = true,
                                             .help = "first current, mA"},
                                            {.key = "to_ma",
                                             .type = FIELD_FIXED,
                                             AT(PC, to_ua),
                                             .least = 0,
                                             .most = 262,
                                             .scale = 1000,
                                             .required = true,
                                             .help = "last current, mA"},
                                            LAST};
static const struct schema piece_schema = {
    .name = "a piece", .size = sizeof(PC), .flow = true, .fields = piece_fields};

static const struct field ramp_fields[] = {
    CHOICE_NEEDED(RP, shape, "shape", ramp_names, "linear, raised-cosine or exponential"),
    NUMBER_NEEDED(RP, ms, "ms", 0, 60000, "length, ms"),
    {.key = "pieces",
     .type = FIELD_ARRAY,
     AT(RP, piece),
     .count = offsetof(RP, pieces),
     .of = &piece_schema,
     .least = 0,
     .most = RAMP_PIECES_MAX,
     .help = "straight pieces, as compiled"},
    LAST};
const struct schema ramp_schema = {.name = "a ramp", .size = sizeof(RP), .flow = true, .fields = ramp_fields};

static bool ramp_there(const void *object, const struct field *field)
{
    const RP *ramp = (const void *)((const char *)object + field->offset);
    return ramp->ms > 0;
}
static bool regular(const void *object, const struct field *field)
{
    (void)field;
    return ((const CN *)object)->gaps == 0;
}

#define RAMP(M, KEY, HELP)                                                                                   \
    {                                                                                                        \
        .key = KEY, .type = FIELD_MAP, AT(CN, M), .of = &ramp_schema, .there = ramp_there, .help = HELP      \
    }
static const struct field contraction_fields[] = {
    {.key = "gaps_ms",
     .type = FIELD_NUMBERS,
     AT(CN, gaps_ms),
     .count = offsetof(CN, gaps),
     .least = 1,
     .most = CONTRACTION_GAPS_MAX,
     .help = "free gaps, ms: n gaps are n + 1 pulses"},
    {.key = "frequency_pps",
     .type = FIELD_NUMBER,
     AT(CN, frequency_pps),
     .least = 0.01,
     .most = 1000,
     .fallback = ABSENT,
     .help = "pulses (pairs) a second"},
    {.key = "opening",
     .type = FIELD_CHOICE,
     AT(CN, opening),
     .choices = opening_names,
     .fallback = 1,
     .there = regular,
     .help = "how the train begins"},
    {.key = "pattern",
     .type = FIELD_SWITCH,
     AT(CN, pairs),
     .choices = pattern_names,
     .there = regular,
     .help = "singles, or doublets throughout"},
    {.key = "opening_gap_ms",
     .type = FIELD_NUMBER,
     AT(CN, opening_gap_ms),
     .least = 1,
     .most = 60,
     .fallback = 5,
     .there = regular,
     .help = "gap inside an opening or a pair, ms"},
    NUMBER_NEEDED(CN, duration_us, "duration_us", 1, 1000, "phase duration, us"),
    NUMBER_NEEDED(CN, current_ma, "current_ma", 0, 262, "peak of a phase, mA"),
    RAMP(ramp_up, "ramp_up", "{shape, ms}"),
    {.key = "hold_ms",
     .type = FIELD_NUMBER,
     AT(CN, hold_ms),
     .least = 0,
     .most = 3600000,
     .fallback = ABSENT,
     .help = "length of the hold, ms"},
    RAMP(ramp_down, "ramp_down", "{shape, ms}"),
    NUMBER_OR(CN, rest_ms, "rest_ms", 0, 36000000, 0, "from the last pulse to the next first pulse, ms"),
    COUNT_OR(CN, repeat, "repeat", 1, TRAIN_CONTRACTIONS_MAX, 1, "how often"),
    LAST};

static void begin_contraction(void *object)
{
    CN *contraction = object;
    contraction->trim_duration_us = contraction->trim_current_ma = ABSENT;
    contraction->ramp_up.ms = contraction->ramp_down.ms = 0;
}

static enum status check_free(struct reading *reading, const char *path, const CN *contraction)
{
    static const char *const regular_keys[] = {"frequency_pps", "opening", "pattern",  "opening_gap_ms",
                                               "ramp_up",       "hold_ms", "ramp_down"};
    char key[256];
    for (size_t i = 0; i < sizeof regular_keys / sizeof regular_keys[0]; i++)
        if (schema_given(reading, schema_path(path, regular_keys[i], key)))
            return schema_fault(reading, key, "does not go with gaps_ms");
    for (size_t i = 0; i < contraction->gaps; i++) {
        if (contraction->gaps_ms[i] >= 0.001 && contraction->gaps_ms[i] <= 3600000) continue;
        (void)schema_path(path, "gaps_ms", key);
        char item[280];
        (void)snprintf(item, sizeof item, "%.240s[%zu]", key, i);
        return schema_fault(reading, item, "holds %g, may hold a gap from 0.001 to 3600000 ms",
                            contraction->gaps_ms[i]);
    }
    return STATUS_OK;
}

static enum status check_contraction(struct reading *reading, const char *path, void *object)
{
    const CN *contraction = object;
    char key[256];
    const struct recruitment *law = schema_context(reading);
    if (law && law->law == RECRUITMENT_DURATION_EXPONENTIAL &&
        fabs(contraction->current_ma - law->current_ma) > 1e-9)
        return schema_fault(
            reading, schema_path(path, "current_ma", key),
            "holds %g, may hold %g: the muscle's duration-exponential law holds at that current only",
            contraction->current_ma, law->current_ma);
    if (contraction->gaps) return check_free(reading, path, contraction);
    if (isnan(contraction->frequency_pps))
        return schema_fault(reading, schema_path(path, "frequency_pps", key),
                            "is absent, a contraction needs it, or gaps_ms");
    if (isnan(contraction->hold_ms))
        return schema_fault(reading, schema_path(path, "hold_ms", key),
                            "is absent, a regular contraction needs it");
    if (!(contraction->hold_ms + contraction->ramp_up.ms + contraction->ramp_down.ms > 0))
        return schema_fault(reading, schema_path(path, "hold_ms", key),
                            "holds 0 and there is no ramp, may hold a time above 0");
    if ((contraction->pairs || contraction->opening > 1) &&
        contraction->opening_gap_ms * contraction->frequency_pps >= 1000)
        return schema_fault(reading, schema_path(path, "opening_gap_ms", key),
                            "holds %g, may hold less than a period, %g ms", contraction->opening_gap_ms,
                            1000 / contraction->frequency_pps);
    return STATUS_OK;
}
static const struct schema contraction_schema = {.name = "a contraction",
                                                 .size = sizeof(CN),
                                                 .flow = true,
                                                 .fields = contraction_fields,
                                                 .begin = begin_contraction,
                                                 .check = check_contraction};

static const struct field train_fields[] = {LIST_NEEDED(struct train, contraction, contractions,
                                                        "contractions", &contraction_schema, 1,
                                                        TRAIN_CONTRACTIONS_MAX, "what is done, in order"),
                                            LAST};

static enum status check_train(struct reading *reading, const char *path, void *object)
{
    const struct train *train = object;
    double pulses = 0;
    char key[64];
    (void)path;
    for (size_t i = 0; i < train->contractions; i++) {
        const CN *c = &train->contraction[i];
        const double span_ms = c->ramp_up.ms + c->hold_ms + c->ramp_down.ms;
        pulses += c->repeat * (c->gaps ? (double)c->gaps + 1
                                       : (span_ms * c->frequency_pps / 1000 + 3) * (c->pairs ? 2 : 1));
        (void)snprintf(key, sizeof key, "contractions[%zu].rest_ms", i);
        if (pulses > TRAIN_PULSES_MAX) {
            (void)snprintf(key, sizeof key, "contractions[%zu]", i);
            return schema_fault(reading, key, "brings the train to %.0f pulses, may have %d", pulses,
                                TRAIN_PULSES_MAX);
        }
        if ((c->repeat > 1 || i + 1 < train->contractions) && !(c->rest_ms > 0))
            return schema_fault(reading, key,
                                "holds no rest before the next contraction, may hold a time above 0, ms");
    }
    return STATUS_OK;
}
const struct schema train_schema = {
    .name = "a train", .size = sizeof(struct train), .fields = train_fields, .check = check_train};

enum status train_parse_for(const struct document_bytes *bytes, const struct recruitment *law,
                            struct train *train, struct message *why)
{
    return schema_parse_with(&train_schema, document_kind_format(DOCUMENT_TRAIN), bytes, train, law, why);
}

enum status train_parse(const struct document_bytes *bytes, struct train *train, struct message *why)
{
    return train_parse_for(bytes, NULL, train, why);
}

enum status train_load_for(const char *path, const struct recruitment *law, struct train *train,
                           struct message *why)
{
    struct document_bytes bytes;
    enum status status = document_read_bytes(path, &bytes, why);
    if (status != STATUS_OK) return status;
    status = train_parse_for(&bytes, law, train, why);
    document_bytes_free(&bytes);
    return status;
}

enum status train_load(const char *path, struct train *train, struct message *why)
{
    return train_load_for(path, NULL, train, why);
}

void train_print(const struct train *train, struct text_out *out)
{
    schema_print(&train_schema, document_kind_format(DOCUMENT_TRAIN), train, out);
}

void train_free(struct train *train)
{
    schema_free(&train_schema, train);
}
