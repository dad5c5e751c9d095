/* Profile documents. The goal of this code: one table says what a person's muscle may hold; rules across keys
 * are told at their place. */
#include "core/document/profile.h"

#include "core/document/fields.h"
#include "core/document/schemas.h"
#include "core/dose/dose.h"
#include <libfyaml.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

typedef struct profile_muscle PM;
typedef struct muscle_parameters MP;
typedef struct recruitment RC;

static const char *const laws[] = {"full", "strength-duration", "duration-exponential", NULL};
static const char *const orders[] = {"size", "reversed", NULL};
static const char *const measured_as[] = {"force", "torque", NULL};
static const char *const found_as[] = {"single", "train", NULL};

static const struct field force_fields[] = {
    NUMBER_NEEDED(MP, A_rest_n_per_ms, "A_rest_n_per_ms", 0.01, 100, "force gain at rest, N/ms"),
    NUMBER_NEEDED(MP, Km_rest, "Km_rest", 0.001, 5, "sensitivity at rest, no unit"),
    NUMBER(MP, R0, "R0", 0.1, 20, "summation of close pulses, no unit"),
    NUMBER(MP, R0_above_Km, "R0_above_Km", 0, 20, "summation as R0 = Km + this, no unit"),
    NUMBER_NEEDED(MP, tau1_rest_ms, "tau1_rest_ms", 0.5, 1000,
                  "relaxation time constant without activation, ms"),
    NUMBER_NEEDED(MP, tau2_ms, "tau2_ms", 0, 2000, "further relaxation time constant with activation, ms"),
    NUMBER_NEEDED(MP, tau_c_ms, "tau_c_ms", 0.5, 200, "activation time constant, ms"),
    LAST};
static enum status check_force(struct reading *reading, const char *path, void *object)
{
    const MP *parameters = object;
    char key[256];
    if (isnan(parameters->R0) == isnan(parameters->R0_above_Km))
        return schema_fault(reading, schema_path(path, "R0", key), "%s, force may hold R0 or R0_above_Km",
                            isnan(parameters->R0) ? "is absent" : "stands beside R0_above_Km");
    return STATUS_OK;
}
static const struct schema force = {
    .name = "force", .size = sizeof(MP), .flow = true, .fields = force_fields, .check = check_force};

static const struct field fatigue_fields[] = {
    NUMBER_OR(MP, alpha_A_per_ms2, "alpha_A_per_ms2", -1e-3, 0, 0, "loss of force gain, 1/ms2, not above 0"),
    NUMBER_OR(MP, alpha_Km_per_ms_n, "alpha_Km_per_ms_n", 0, 1e-3, 0,
              "loss of sensitivity, 1/(ms N), not below 0"),
    NUMBER_OR(MP, alpha_tau1_per_n, "alpha_tau1_per_n", 0, 1, 0, "slowing of relaxation, 1/N, not below 0"),
    NUMBER_NEEDED(MP, tau_fat_ms, "tau_fat_ms", 1000, 10000000, "recovery time constant, ms"),
    NUMBER_OR(MP, beta_A_per_pulse, "beta_A_per_pulse", 0, 0.1, 0, "loss of force gain a pulse, no unit"),
    LAST};
static enum status check_fatigue(struct reading *reading, const char *path, void *object)
{
    const MP *parameters = object;
    char key[256];
    if (parameters->alpha_tau1_per_n > 0 && !(parameters->alpha_A_per_ms2 < 0))
        return schema_fault(reading, schema_path(path, "alpha_tau1_per_n", key),
                            "holds %g without an alpha_A_per_ms2 below 0: relaxation would slow without end; "
                            "give alpha_A_per_ms2 or hold 0",
                            parameters->alpha_tau1_per_n);
    return STATUS_OK;
}
static const struct schema fatigue = {
    .name = "fatigue", .size = sizeof(MP), .flow = true, .fields = fatigue_fields, .check = check_fatigue};

static const struct field recruitment_fields[] = {
    CHOICE_NEEDED(RC, law, "law", laws, "the law that turns a pulse into a share of motor units"),
    NUMBER_ABOVE(RC, rheobase_ma, "rheobase_ma", 0, 500,
                 "current of an endless pulse at half recruitment, mA"),
    NUMBER_ABOVE(RC, chronaxie_us, "chronaxie_us", 0, 5000, "duration at twice rheobase, us"),
    NUMBER_ABOVE(RC, spread, "spread", 0, 5, "spread of the logarithm of thresholds, no unit"),
    NUMBER(RC, pd0_us, "pd0_us", 0, 1000, "duration below which nothing is recruited, us"),
    NUMBER_ABOVE(RC, pdt_us, "pdt_us", 0, 5000, "duration constant of recruitment, us"),
    NUMBER_ABOVE(RC, current_ma, "current_ma", 0, 200, "the one current at which this law holds, mA"),
    LAST};
static enum status check_recruitment(struct reading *reading, const char *path, void *object)
{
    const RC *recruitment = object;
    static const struct {
        const char *key;
        size_t offset;
        enum recruitment_law law;
    } owned[] = {{"rheobase_ma", offsetof(RC, rheobase_ma), RECRUITMENT_STRENGTH_DURATION},
                 {"chronaxie_us", offsetof(RC, chronaxie_us), RECRUITMENT_STRENGTH_DURATION},
                 {"spread", offsetof(RC, spread), RECRUITMENT_STRENGTH_DURATION},
                 {"pd0_us", offsetof(RC, pd0_us), RECRUITMENT_DURATION_EXPONENTIAL},
                 {"pdt_us", offsetof(RC, pdt_us), RECRUITMENT_DURATION_EXPONENTIAL},
                 {"current_ma", offsetof(RC, current_ma), RECRUITMENT_DURATION_EXPONENTIAL}};
    char key[256];
    for (size_t i = 0; i < sizeof owned / sizeof owned[0]; i++) {
        const bool given =
            !isnan(*(const double *)(const void *)((const char *)recruitment + owned[i].offset));
        if (given == (owned[i].law == recruitment->law)) continue;
        return schema_fault(reading, schema_path(path, owned[i].key, key),
                            given ? "does not go with the law %s" : "is absent, the law %s needs it",
                            laws[recruitment->law]);
    }
    return STATUS_OK;
}
const struct schema recruitment_schema = {.name = "recruitment",
                                          .size = sizeof(RC),
                                          .flow = true,
                                          .fields = recruitment_fields,
                                          .check = check_recruitment};

static const struct field potentiation_fields[] = {
    NUMBER_NEEDED(MP, potentiation_gain, "gain", 0, 20,
                  "how much less sensitive the dormant muscle is, no unit"),
    NUMBER_NEEDED_ABOVE(MP, potentiation_rise_ms, "rise_ms", 0, 100000,
                        "time of full activation to potentiate, ms"),
    NUMBER_NEEDED_ABOVE(MP, potentiation_decay_ms, "decay_ms", 0, 10000000, "time to lose it, ms"), LAST};
static const struct schema potentiation = {
    .name = "potentiation", .size = sizeof(MP), .flow = true, .fields = potentiation_fields};

static const struct field pool_fields[] = {
    CHOICE_NEEDED(MP, pool_order, "order", orders,
                  "which motor units come first: the smallest (size) or the largest (reversed)"),
    NUMBER_NEEDED(MP, force_range, "force_range", 1, 1000, "force of the largest over the smallest unit"),
    NUMBER_NEEDED(MP, speed_range, "speed_range", 1, 30,
                  "time constants of the smallest over the largest unit"),
    NUMBER_NEEDED(MP, fatigue_range, "fatigue_range", 1, 1000,
                  "fatigue of the largest over the smallest unit"),
    LAST};
static const struct schema pool = {.name = "pool", .size = sizeof(MP), .flow = true, .fields = pool_fields};

static const struct field length_fields[] = {
    NUMBER(MP, length_factor, "factor", 0, 2, "force at this length over that at the best one"),
    NUMBER(MP, length_relative, "relative", 0.2, 2.5, "length over the best length"),
    NUMBER(MP, length_reference_mm, "reference_mm", 0.1, 2000, "length at which the numbers hold, mm"),
    NUMBER(MP, slope_Km, "slope_Km", -10, 10, "change of ln Km over 10 mm"),
    NUMBER(MP, slope_tau1, "slope_tau1", -10, 10, "change of ln tau1 over 10 mm"),
    NUMBER(MP, slope_tau_c, "slope_tau_c", -10, 10, "change of ln tau_c over 10 mm"),
    LAST};
static enum status check_length(struct reading *reading, const char *path, void *object)
{
    const MP *parameters = object;
    char key[256];
    if (!isnan(parameters->length_factor) && !isnan(parameters->length_relative))
        return schema_fault(reading, schema_path(path, "relative", key),
                            "stands beside factor, length may hold one of both");
    return STATUS_OK;
}
static const struct schema length_schema = {
    .name = "length", .size = sizeof(MP), .flow = true, .fields = length_fields, .check = check_length};

static const struct field measured_fields[] = {
    DAY(PM, measured.on, "on", "the day it was measured"),
    NUMBER(PM, measured.joint_deg, "joint_deg", -180, 180, "joint angle, degrees"),
    TEXT(PM, measured.electrodes, "electrodes", "size and place of the pads"),
    SWITCH(PM, measured.as_torque, "as", measured_as, "what was measured"),
    NUMBER_ABOVE(PM, measured.lever_m, "lever_m", 0, 2, "lever from the joint to the force sensor, m"),
    LAST};
static const struct schema measured = {
    .name = "measured", .size = sizeof(PM), .flow = true, .fields = measured_fields};

#define LIMIT(M, MOST, HELP) NUMBER_ABOVE(PM, limits.M, #M, 0, MOST, HELP)
/* Ceilings: the program's own, so that no document raises them. */
static const struct field person_limit_fields[] = {
    LIMIT(current_ma, 200, "greatest peak current, mA"),
    LIMIT(duration_us, 1000, "greatest phase duration, us"),
    LIMIT(frequency_pps, 120, "most pulses a second"),
    LIMIT(charge_uc, 100, "greatest charge of a phase, uC"),
    LIMIT(rms_ma, 50, "greatest r.m.s. current over a second, mA"),
    NUMBER(PM, limits.gap_us, "gap_us", 2000, 10000000, "least time between pulses, us"),
    LIMIT(on_ms, 600000, "longest train, ms"),
    LIMIT(duty_percent, 100, "on-time over session time, %"),
    LIMIT(first_uc, 100, "charge that may be given at once, uC"),
    LIMIT(slew_uc_per_s, 1000, "rise of charge, uC/s"),
    NUMBER(PM, limits.slew_memory_ms, "slew_memory_ms", 500, 10000,
           "how long a charge that was given may be given again at once, ms"),
    LIMIT(session_pulses, 1000000, "most pulses in a session"),
    LIMIT(session_charge_mc, 20000, "most charge in a session, mC"),
    LIMIT(session_ms, 10800000, "longest session, ms"),
    NUMBER_ABOVE(PM, limits.force_n, "force_n", 0, 10000, "greatest force, N"),
    CODE(PM, limits_set_by, "set_by", "who set them, a code"),
    DAY(PM, limits_set_on, "set_on", "the day they were set"),
    LAST};
static const struct schema limits_schema = {
    .name = "limits", .size = sizeof(PM), .flow = true, .fields = person_limit_fields};

static const struct field found_fields[] = {
    NUMBER_NEEDED_ABOVE(PM, found.duration_us, "duration_us", 0, 1000, "phase duration used, us"),
    NUMBER_NEEDED_ABOVE(PM, found.threshold_ma, "threshold_ma", 0, 200,
                        "current at which the muscle first answers, mA"),
    NUMBER_NEEDED_ABOVE(PM, found.comfort_ma, "comfort_ma", 0, 200,
                        "greatest current that was comfortable, mA"),
    SWITCH_NEEDED(PM, found.as_train, "as", found_as, "found with single pulses or with a train"),
    DAY(PM, found.on, "on", "the day it was found"),
    CODE(PM, found.by, "by", "who found it, a code"),
    LAST};
static enum status check_found(struct reading *reading, const char *path, void *object)
{
    const PM *muscle = object;
    char key[256];
    if (muscle->found.comfort_ma < muscle->found.threshold_ma)
        return schema_fault(reading, schema_path(path, "comfort_ma", key),
                            "holds %g, may hold at least threshold_ma, %g", muscle->found.comfort_ma,
                            muscle->found.threshold_ma);
    return STATUS_OK;
}
static const struct schema found = {
    .name = "found", .size = sizeof(PM), .flow = true, .fields = found_fields, .check = check_found};

static const char *const parameter_keys[] = {"A_rest_n_per_ms",
                                             "Km_rest",
                                             "R0",
                                             "R0_above_Km",
                                             "tau1_rest_ms",
                                             "tau2_ms",
                                             "tau_c_ms",
                                             "alpha_A_per_ms2",
                                             "alpha_Km_per_ms_n",
                                             "alpha_tau1_per_n",
                                             "tau_fat_ms",
                                             "beta_A_per_pulse",
                                             "rheobase_ma",
                                             "chronaxie_us",
                                             "spread",
                                             "pd0_us",
                                             "pdt_us",
                                             "gain",
                                             "rise_ms",
                                             "decay_ms",
                                             "factor",
                                             "slope_Km",
                                             "slope_tau1",
                                             "slope_tau_c",
                                             "delay_ms",
                                             NULL};

static const char *parameter_key(const char *text, size_t length)
{
    for (int i = 0; parameter_keys[i]; i++)
        if (strlen(parameter_keys[i]) == length && memcmp(parameter_keys[i], text, length) == 0)
            return parameter_keys[i];
    return NULL;
}

static enum status read_uncertainty(struct reading *reading, struct fy_node *node, const char *path,
                                    void *object, const struct field *field)
{
    PM *muscle = object;
    char key_path[256];
    (void)field;
    if (!fy_node_is_mapping(node))
        return schema_fault(reading, path,
                            "is no map, may hold a relative s.d. by parameter: {A_rest_n_per_ms: 0.06}");
    void *previous = NULL;
    struct fy_node_pair *pair;
    while ((pair = fy_node_mapping_iterate(node, &previous)) != NULL) {
        size_t length = 0;
        const char *text = fy_node_get_scalar(fy_node_pair_key(pair), &length);
        const char *key = text ? parameter_key(text, length) : NULL;
        char word[64];
        (void)snprintf(word, sizeof word, "%.*s", (int)(length > 60 ? 60 : length), text ? text : "?");
        schema_path(path, word, key_path);
        for (size_t i = 0; key && i < muscle->uncertainties; i++)
            if (strcmp(muscle->uncertainty[i].key, key) == 0)
                return schema_fault(reading, key_path, "stands a second time, may stand once");
        schema_note(reading, key_path, fy_node_pair_key(pair));
        if (!key)
            return schema_fault(reading, key_path,
                                "is unknown here, uncertainty may hold keys of the muscle's parameters, such "
                                "as A_rest_n_per_ms");
        if (muscle->uncertainties == UNCERTAINTY_MAX)
            return schema_fault(reading, key_path, "is one too many, may be %d", UNCERTAINTY_MAX);
        struct uncertainty_entry *entry = &muscle->uncertainty[muscle->uncertainties];
        if (!fy_node_pair_value(pair))
            return schema_fault(reading, key_path, "holds nothing, may hold a relative s.d.");
        const enum status status = schema_read_number(reading, fy_node_pair_value(pair), key_path, 0, 10,
                                                      false, &entry->relative_sd);
        if (status != STATUS_OK) return status;
        (void)snprintf(entry->key, sizeof entry->key, "%s", key);
        muscle->uncertainties++;
    }
    return STATUS_OK;
}

static void print_uncertainty(const void *object, const struct field *field, struct text_out *out, int indent)
{
    const PM *muscle = object;
    char number[32];
    (void)field;
    (void)indent;
    text_out_print(out, "{");
    for (size_t i = 0; i < muscle->uncertainties; i++)
        text_out_print(out, "%s%s: %s", i ? ", " : "", muscle->uncertainty[i].key,
                       number_text(muscle->uncertainty[i].relative_sd, number));
    text_out_print(out, "}");
}

static enum status read_covariance(struct reading *reading, struct fy_node *node, const char *path,
                                   void *object, const struct field *field)
{
    PM *muscle = object;
    char item_path[256];
    const size_t n = muscle->uncertainties;
    (void)field;
    if (n == 0) return schema_fault(reading, path, "stands before uncertainty or without it, may follow it");
    if (!fy_node_is_sequence(node) || fy_node_sequence_item_count(node) != (int)n)
        return schema_fault(reading, path, "is no list of %zu rows, may hold one for each key of uncertainty",
                            n);
    muscle->covariance = calloc(n * n, sizeof *muscle->covariance);
    if (!muscle->covariance) return schema_fault(reading, path, "finds no memory");
    void *previous = NULL;
    struct fy_node *row;
    for (size_t i = 0; (row = fy_node_sequence_iterate(node, &previous)) != NULL; i++) {
        (void)snprintf(item_path, sizeof item_path, "%.200s[%zu]", path, i);
        schema_note(reading, item_path, row);
        if (!fy_node_is_sequence(row) || fy_node_sequence_item_count(row) != (int)n)
            return schema_fault(reading, item_path, "is no list of %zu numbers", n);
        void *previous_cell = NULL;
        struct fy_node *cell;
        for (size_t j = 0; (cell = fy_node_sequence_iterate(row, &previous_cell)) != NULL; j++) {
            const enum status status = schema_read_number(reading, cell, item_path, -100, 100, false,
                                                          &muscle->covariance[i * n + j]);
            if (status != STATUS_OK) return status;
        }
    }
    for (size_t i = 0; i < n; i++)
        for (size_t j = 0; j <= i; j++)
            if (fabs(muscle->covariance[i * n + j] - muscle->covariance[j * n + i]) >
                    1e-9 * (1 + fabs(muscle->covariance[i * n + j])) ||
                muscle->covariance[i * n + i] < 0)
                return schema_fault(reading, path,
                                    "is not symmetric with variances from 0 (row %zu, column %zu)", i + 1,
                                    j + 1);
    return STATUS_OK;
}

static void print_covariance(const void *object, const struct field *field, struct text_out *out, int indent)
{
    const PM *muscle = object;
    char number[32];
    const size_t n = muscle->uncertainties;
    (void)field;
    (void)indent;
    text_out_print(out, "[");
    for (size_t i = 0; i < n * n; i++) {
        text_out_print(out, "%s%s",
                       i % n ? ", "
                       : i   ? "], ["
                             : "[",
                       number_text(muscle->covariance[i], number));
    }
    text_out_print(out, "]]");
}

#define PARAMETERS(KEY, OF, HAS, NEEDED, HELP)                                                               \
    {                                                                                                        \
        .key = KEY, .type = FIELD_MAP, .offset = offsetof(PM, parameters), .of = OF, .has = HAS,             \
        .required = NEEDED, .help = HELP                                                                     \
    }
static const struct field muscle_fields[] = {
    CODE_NEEDED(PM, name, "name", "the muscle, a word such as left-quadriceps"),
    {.key = "measured",
     .type = FIELD_MAP,
     .offset = 0,
     .of = &measured,
     .has = offsetof(PM, has_measured),
     .help = "when and how it was measured"},
    PARAMETERS("force", &force, offsetof(PM, parameters.has_force), false, "parameters of force"),
    PARAMETERS("fatigue", &fatigue, offsetof(PM, parameters.has_fatigue), false, "parameters of fatigue"),
    {.key = "recruitment",
     .type = FIELD_MAP,
     .offset = offsetof(PM, parameters.recruitment),
     .of = &recruitment_schema,
     .has = NO_OFFSET,
     .required = true,
     .help = "{law: full}, or a law with its numbers"},
    PARAMETERS("potentiation", &potentiation, offsetof(PM, parameters.has_potentiation), false,
               "staircase; absent: fully potentiated throughout"),
    PARAMETERS("pool", &pool, offsetof(PM, parameters.has_pool), false, "how tiers differ; absent: alike"),
    PARAMETERS("length", &length_schema, NO_OFFSET, false, "{factor: 1.0} or {relative: 1.1}"),
    NUMBER_OR(PM, parameters.tone_n, "tone_n", 0, 1000, 0, "force without stimulation, N"),
    NUMBER_OR(PM, parameters.delay_ms, "delay_ms", 0, 500, 0, "from pulse to force, ms"),
    COUNT_OR(PM, parameters.tiers, "tiers", 1, MUSCLE_TIERS_MAX, 1,
             "groups of motor units by recruitment order"),
    NUMBER_ABOVE(PM, electrode_area_cm2, "electrode_area_cm2", 0, 2000, "area of a pad, cm2"),
    {.key = "limits",
     .type = FIELD_MAP,
     .offset = 0,
     .of = &limits_schema,
     .has = offsetof(PM, has_limits),
     .help = "this person's limits; absent ones are the program's"},
    {.key = "found",
     .type = FIELD_MAP,
     .offset = 0,
     .of = &found,
     .has = offsetof(PM, has_found),
     .help = "threshold and comfort found at the bedside"},
    {.key = "uncertainty",
     .type = FIELD_OWN,
     .offset = 0,
     .has = offsetof(PM, uncertainties),
     .read = read_uncertainty,
     .print = print_uncertainty,
     .help = "relative s.d. of parameters by key"},
    {.key = "covariance",
     .type = FIELD_OWN,
     .offset = 0,
     .has = offsetof(PM, covariance),
     .read = read_covariance,
     .print = print_covariance,
     .help = "of the logarithms, row by row, written by a fit"},
    LAST};

static void begin_muscle(void *object)
{
    PM *muscle = object;
    muscle->parameters.tau_fat_ms = 1e5;
    muscle->parameters.alpha_A_per_ms2 = muscle->parameters.alpha_Km_per_ms_n =
        muscle->parameters.alpha_tau1_per_n = 0;
    muscle->parameters.beta_A_per_pulse = 0;
}

static enum status check_muscle(struct reading *reading, const char *path, void *object)
{
    PM *muscle = object;
    MP *parameters = &muscle->parameters;
    char key[256];
    if (isnan(parameters->length_factor) && isnan(parameters->length_relative)) parameters->length_factor = 1;
    if (parameters->has_pool && parameters->tiers < 2)
        return schema_fault(
            reading,
            schema_path(path, schema_given(reading, schema_path(path, "tiers", key)) ? "tiers" : "pool", key),
            "a pool stands on %u tier, may stand on 2 to %d", parameters->tiers, MUSCLE_TIERS_MAX);
    return STATUS_OK;
}
static void free_muscle(void *object)
{
    PM *muscle = object;
    free(muscle->covariance);
    muscle->covariance = NULL;
}
static const struct schema muscle_schema = {.name = "a muscle",
                                            .size = sizeof(PM),
                                            .fields = muscle_fields,
                                            .begin = begin_muscle,
                                            .check = check_muscle,
                                            .free = free_muscle};

static const struct field profile_fields[] = {
    CODE_NEEDED(struct profile, person, "person", "a code, no name: P-017"),
    LIST_NEEDED(struct profile, muscle, muscles, "muscles", &muscle_schema, 1, PROFILE_MUSCLES_MAX,
                "a list of muscles"),
    LAST};
static enum status check_profile(struct reading *reading, const char *path, void *object)
{
    const struct profile *profile = object;
    char key[256];
    (void)path;
    for (size_t i = 0; i < profile->muscles; i++)
        for (size_t j = 0; j < i; j++) {
            if (strcmp(profile->muscle[i].name, profile->muscle[j].name) != 0) continue;
            (void)snprintf(key, sizeof key, "muscles[%zu].name", i);
            return schema_fault(reading, key,
                                "holds %s a second time (first as muscles[%zu]), each muscle may stand once",
                                profile->muscle[i].name, j);
        }
    return STATUS_OK;
}
const struct schema profile_schema = {
    .name = "a profile", .size = sizeof(struct profile), .fields = profile_fields, .check = check_profile};

enum status profile_parse(const struct document_bytes *bytes, struct profile *profile, struct message *why)
{
    return schema_parse(&profile_schema, document_kind_format(DOCUMENT_PROFILE), bytes, profile, why);
}

enum status profile_load(const char *path, struct profile *profile, struct message *why)
{
    struct document_bytes bytes;
    enum status status = document_read_bytes(path, &bytes, why);
    if (status != STATUS_OK) return status;
    status = profile_parse(&bytes, profile, why);
    document_bytes_free(&bytes);
    return status;
}

void profile_print(const struct profile *profile, struct text_out *out)
{
    schema_print(&profile_schema, document_kind_format(DOCUMENT_PROFILE), profile, out);
}

void profile_free(struct profile *profile)
{
    schema_free(&profile_schema, profile);
}

const struct profile_muscle *profile_muscle(const struct profile *profile, const char *name,
                                            struct message *why)
{
    char names[600] = "";
    if (!name && profile->muscles == 1) return &profile->muscle[0];
    for (size_t i = 0; i < profile->muscles; i++) {
        if (name && strcmp(profile->muscle[i].name, name) == 0) return &profile->muscle[i];
        const size_t used = strlen(names);
        (void)snprintf(names + used, sizeof names - used, "%s%s", used ? ", " : "", profile->muscle[i].name);
    }
    (void)status_fail(why, STATUS_DOCUMENT, "%s%s%s: profile %s has %s",
                      name ? "no muscle \"" : "which muscle?", name ? name : "", name ? "\"" : "",
                      profile->person, names);
    return NULL;
}

enum status profile_muscle_usable(const struct profile_muscle *muscle, struct message *why)
{
    if (!muscle->parameters.has_force)
        return status_fail(why, STATUS_DOCUMENT, "muscle %s has no force block: fit it from recordings first",
                           muscle->name);
    if (!muscle->parameters.has_fatigue)
        return status_fail(why, STATUS_DOCUMENT,
                           "muscle %s has no fatigue block: fit it from recordings first (for a muscle that "
                           "does not tire say fatigue: "
                           "{tau_fat_ms: 100000})",
                           muscle->name);
    return STATUS_OK;
}
