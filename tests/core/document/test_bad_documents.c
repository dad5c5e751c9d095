/* Bad documents: each row changes one thing in a sound document and says what the one line of the answer must
 * hold. The place is marked by @ in the changed text and counted here, so that it does not come from the
 * reader under test. YAML scalars: YAML 1.2.2, 10.3 (what a plain number is); the project takes its decimal
 * forms only. */
#include "core/document/demand.h"
#include "core/document/hookup.h"
#include "core/document/profile.h"
#include "core/document/recordings.h"
#include "core/document/stimulator.h"
#include "core/document/train_document.h"
#include "support/near.h"

#include <stdio.h>
#include <stdlib.h>
#include <string.h>

static const char profile_text[] =
    "format: pulsewright-profile-1\n"
    "person: P-017\n"
    "muscles:\n"
    "  - name: quadriceps\n"
    "    force: {A_rest_n_per_ms: 3.009, Km_rest: 0.103, R0: 1.143, tau1_rest_ms: 50.957, tau2_ms: 60, "
    "tau_c_ms: 20}\n"
    "    fatigue: {alpha_A_per_ms2: -4.0e-7, alpha_Km_per_ms_n: 1.9e-8, alpha_tau1_per_n: 2.1e-5, "
    "tau_fat_ms: 127000}\n"
    "    recruitment: {law: strength-duration, rheobase_ma: 22, chronaxie_us: 180, spread: 0.25}\n"
    "    pool: {order: size, force_range: 50, speed_range: 3, fatigue_range: 10}\n"
    "    length: {factor: 1.0}\n"
    "    tiers: 8\n"
    "    limits: {current_ma: 80, gap_us: 4000, set_on: 2026-11-02}\n"
    "    found: {duration_us: 300, threshold_ma: 24, comfort_ma: 65, as: single}\n"
    "  - name: hamstrings\n"
    "    recruitment: {law: full}\n";
static const char demand_text[] = "format: pulsewright-demand-1\n"
                                  "kind: hold\n"
                                  "muscle: quadriceps\n"
                                  "target_n: 150\n"
                                  "hold_ms: 4000\n"
                                  "rest_ms: 8000\n"
                                  "contractions: 60\n"
                                  "warm_up: 3\n"
                                  "opening: [single, doublet]\n"
                                  "vary: [frequency]\n"
                                  "duration_us: {from: 100, to: 300}\n";
static const char stimulator_text[] = "format: pulsewright-stimulator-1\n"
                                      "name: bench\n"
                                      "channels: 6\n"
                                      "current_ma: {from: 0, to: 110, step: 0.5}\n"
                                      "duration_us: {from: 40, to: 800, step: 5}\n"
                                      "frequency_pps: {from: 1, to: 100, step: 1}\n"
                                      "gap_us_min: 4000\n"
                                      "phases: symmetric\n"
                                      "interphase_us: 100\n"
                                      "returns: [[1, 2], [3, 4]]\n"
                                      "compliance_v: 150\n"
                                      "load_ohm: 1000\n"
                                      "baud: 115200\n";
static const char hookup_text[] = "format: pulsewright-hookup-1\n"
                                  "person: P-017\n"
                                  "channels:\n"
                                  "  - {channel: 1, muscle: quadriceps, pad_cm2: 45}\n"
                                  "  - {channel: 2, muscle: hamstrings, pad_cm2: 45}\n";
static const char train_text[] = "format: pulsewright-train-1\n"
                                 "contractions:\n"
                                 "  - {frequency_pps: 30, opening: doublet, duration_us: 300, current_ma: "
                                 "60, hold_ms: 1000, rest_ms: 1000, repeat: 10}\n"
                                 "  - {gaps_ms: [5, 40], duration_us: 300, current_ma: 60}\n";
static const char recordings_text[] =
    "format: pulsewright-recordings-1\n"
    "muscle: quadriceps\n"
    "recordings:\n"
    "  - name: one\n"
    "    kind: force\n"
    "    pulses: {file: pulses.csv}\n"
    "    signal: {file: one.csv, time: time_s, time_unit: s, value: force_n, unit: N}\n"
    "    use: fit\n";

static const char *const sound[] = {
    [DOCUMENT_PROFILE] = profile_text,       [DOCUMENT_DEMAND] = demand_text,
    [DOCUMENT_STIMULATOR] = stimulator_text, [DOCUMENT_HOOKUP] = hookup_text,
    [DOCUMENT_TRAIN] = train_text,           [DOCUMENT_RECORDINGS] = recordings_text};
enum { KINDS = sizeof sound / sizeof sound[0], TEXT_SIZE = 4096 };

static enum status read_kind(enum document_kind kind, const struct document_bytes *bytes, struct message *why)
{
    union {
        struct profile profile;
        struct demand demand;
        struct stimulator stimulator;
        struct hookup hookup;
        struct train train;
        struct recordings recordings;
    } it;
    enum status status = STATUS_INTERNAL;
    switch (kind) {
    case DOCUMENT_PROFILE:
        status = profile_parse(bytes, &it.profile, why);
        if (status == STATUS_OK) profile_free(&it.profile);
        break;
    case DOCUMENT_DEMAND:
        status = demand_parse(bytes, &it.demand, why);
        if (status == STATUS_OK) demand_free(&it.demand);
        break;
    case DOCUMENT_STIMULATOR: status = stimulator_parse(bytes, &it.stimulator, why); break;
    case DOCUMENT_HOOKUP: status = hookup_parse(bytes, &it.hookup, why); break;
    case DOCUMENT_TRAIN:
        status = train_parse(bytes, &it.train, why);
        if (status == STATUS_OK) train_free(&it.train);
        break;
    case DOCUMENT_RECORDINGS:
        status = recordings_parse(bytes, &it.recordings, why);
        if (status == STATUS_OK) recordings_free(&it.recordings);
        break;
    default: break;
    }
    return status;
}

struct bad {
    enum document_kind kind;
    const char *find, *change; /* @ marks the place that must be told; no @: any place */
    const char *key, *phrase;
};
#define P DOCUMENT_PROFILE
#define D DOCUMENT_DEMAND
#define S DOCUMENT_STIMULATOR
#define H DOCUMENT_HOOKUP
#define T DOCUMENT_TRAIN
#define R DOCUMENT_RECORDINGS
static const struct bad bads[] = {
    /* numbers */
    {P, "tau2_ms: 60", "tau2_ms: @3.0q", "muscles[0].force.tau2_ms", "3.0q"},
    {P, "tau2_ms: 60", "tau2_ms: @nan", "muscles[0].force.tau2_ms", "nan"},
    {P, "tau2_ms: 60", "tau2_ms: @.inf", "muscles[0].force.tau2_ms", ".inf"},
    {P, "tau2_ms: 60", "tau2_ms: @0x3c", "muscles[0].force.tau2_ms", "0x3c"},
    {P, "tau2_ms: 60", "tau2_ms: @1e999", "muscles[0].force.tau2_ms", "1e999"},
    {P, "tau2_ms: 60", "tau2_ms: @6_0", "muscles[0].force.tau2_ms", "6_0"},
    {P, "tau2_ms: 60", "tau2_ms: @true", "muscles[0].force.tau2_ms", "true"},
    {P, "tau2_ms: 60", "tau2_ms: [@60]", "muscles[0].force.tau2_ms", "may hold"},
    {P, "tau2_ms: 60", "tau2_ms: ", "muscles[0].force.tau2_ms", "may hold"},
    {P, "tau2_ms: 60", "tau2_ms: @-1", "muscles[0].force.tau2_ms", "-1"},
    {P, "Km_rest: 0.103", "Km_rest: @0", "muscles[0].force.Km_rest", "0"},
    {P, "A_rest_n_per_ms: 3.009", "A_rest_n_per_ms: @-3", "muscles[0].force.A_rest_n_per_ms", "-3"},
    {P, "tiers: 8", "tiers: @8.5", "muscles[0].tiers", "8.5"},
    {P, "tiers: 8", "tiers: @33", "muscles[0].tiers", "32"},
    {P, "tiers: 8", "tiers: @0", "muscles[0].tiers", "1"},
    {P, "tiers: 8", "tiers: @-1", "muscles[0].tiers", "-1"},
    {D, "contractions: 60", "contractions: @1000000000", "contractions", "10000"},
    {D, "contractions: 60", "contractions: @0", "contractions", "1"},
    {D, "contractions: 60", "contractions: @sixty", "contractions", "sixty"},
    /* keys */
    {P, "R0: 1.143, ", "", "muscles[0].force.R0", "R0_above_Km"},
    {P, "R0: 1.143", "R0: @1.143, R0_above_Km: 1.04", "muscles[0].force.R0", "R0_above_Km"},
    {P, "tau_c_ms: 20", "@tau_d_ms: 20", "muscles[0].force.tau_d_ms", "unknown"},
    {P, ", tau_c_ms: 20", "", "muscles[0].force.tau_c_ms", "absent"},
    {P, "tiers: 8", "tiers: 8\n    @tiers: 8", "muscles[0].tiers", "second time"},
    {P, "Km_rest: 0.103", "Km_rest: 0.103, @Km_rest: 0.2", "muscles[0].force.Km_rest", "second time"},
    {P, "person: P-017\n", "", "person", "absent"},
    {P, "person: P-017", "person: @Jo Doe", "person", "code"},
    {P, "person: P-017", "person: @\"\"", "person", "nothing"},
    {P, "name: hamstrings", "name: @quadriceps", "muscles[1].name", "second time"},
    {P, "    recruitment: {law: full}\n", "", "muscles[1].recruitment", "absent"},
    {P, "pulsewright-profile-1", "@pulsewright-profile-2", "format", "pulsewright-profile-1"},
    {P, "tiers: 8", "@tier: 8", "muscles[0].tier", "unknown"},
    {D, "muscle: quadriceps\n", "", "muscle", "absent"},
    {D, "warm_up: 3", "@warmup: 3", "warmup", "unknown"},
    /* rules of a profile */
    {P, "alpha_A_per_ms2: -4.0e-7", "alpha_A_per_ms2: @4.0e-7", "muscles[0].fatigue.alpha_A_per_ms2", "0"},
    {P, "alpha_A_per_ms2: -4.0e-7, ", "", "muscles[0].fatigue.alpha_tau1_per_n", "alpha_A_per_ms2"},
    {P, "alpha_tau1_per_n: 2.1e-5", "alpha_tau1_per_n: @-2.1e-5", "muscles[0].fatigue.alpha_tau1_per_n", "0"},
    {P, "alpha_Km_per_ms_n: 1.9e-8", "alpha_Km_per_ms_n: @-1.9e-8", "muscles[0].fatigue.alpha_Km_per_ms_n",
     "0"},
    {P, "tiers: 8", "tiers: 1", "muscles[0]", "tiers"},
    {P, "spread: 0.25", "spread: @0", "muscles[0].recruitment.spread", "above 0"},
    {P, ", spread: 0.25", "", "muscles[0].recruitment.spread", "strength-duration"},
    {P, "law: full", "law: full, rheobase_ma: @20", "muscles[1].recruitment.rheobase_ma", "full"},
    {P, "law: full", "law: @sigmoid", "muscles[1].recruitment.law", "strength-duration"},
    {P, "factor: 1.0", "factor: 1.0, relative: @1.1", "muscles[0].length.relative", "factor"},
    {P, "order: size", "order: @random", "muscles[0].pool.order", "reversed"},
    {P, "force_range: 50", "force_range: @0.5", "muscles[0].pool.force_range", "0.5"},
    {P, "current_ma: 80", "current_ma: @201", "muscles[0].limits.current_ma", "200"},
    {P, "gap_us: 4000", "gap_us: @1999", "muscles[0].limits.gap_us", "2000"},
    {P, "gap_us: 4000", "charge_uc: @101", "muscles[0].limits.charge_uc", "100"},
    {P, "gap_us: 4000", "frequency_pps: @121", "muscles[0].limits.frequency_pps", "120"},
    {P, "set_on: 2026-11-02", "set_on: @2026-02-29", "muscles[0].limits.set_on", "2026-02-29"},
    {P, "set_on: 2026-11-02", "set_on: @2.11.2026", "muscles[0].limits.set_on", "2.11.2026"},
    {P, "comfort_ma: 65", "comfort_ma: @20", "muscles[0].found.comfort_ma", "threshold_ma"},
    {P, "as: single", "as: @twitch", "muscles[0].found.as", "train"},
    /* demand */
    {D, "kind: hold", "kind: @cycling", "kind", "cycling"},
    {D, "target_n: 150", "target_n: 150\ntarget_percent: @20", "target_percent", "target"},
    {D, "target_n: 150\n", "", "target_n", "target_percent"},
    {D, "target_n: 150", "target_n: @0", "target_n", "0"},
    {D, "[single, doublet]", "[single, @quadruplet]", "opening", "triplet"},
    {D, "[frequency]", "[frequency, @colour]", "vary", "current"},
    {D, "{from: 100, to: 300}", "{from: 300, to: 100}", "duration_us", "300"},
    {D, "rest_ms: 8000\n", "", "rest_ms", "absent"},
    /* stimulator */
    {S, "channels: 6", "channels: @9", "channels", "8"},
    {S, "{from: 0, to: 110, step: 0.5}", "{from: 0, to: 110, step: @0}", "current_ma.step", "0"},
    {S, "{from: 40, to: 800, step: 5}", "{from: 900, to: 800, step: 5}", "duration_us", "900"},
    {S, "gap_us_min: 4000", "gap_us_min: @0", "gap_us_min", "0"},
    {S, "phases: symmetric", "phases: capacitor-balanced", "recovery_us", "capacitor-balanced"},
    {S, "phases: symmetric", "phases: @monophasic", "phases", "symmetric"},
    {S, "[[1, 2], [3, 4]]", "[[1, 2], [2, 3]]", "returns", "2"},
    {S, "[[1, 2], [3, 4]]", "[[1, 7]]", "returns", "7"},
    {S, "baud: 115200", "baud: @9600", "baud", "57600"},
    /* hookup */
    {H, "channel: 2", "channel: @1", "channels[1].channel", "second time"},
    {H, "channel: 2", "channel: @9", "channels[1].channel", "8"},
    {H, "pad_cm2: 45", "pad_cm2: @0", "channels[0].pad_cm2", "above 0"},
    {H, "person: P-017", "person: @P 017", "person", "code"},
    /* train */
    {T, "repeat: 10", "repeat: @1000000000", "contractions[0].repeat", "10000"},
    {T, "repeat: 10", "repeat: 10000, hold_ms: 60000", "contractions[0].hold_ms", "second time"},
    {T, "rest_ms: 1000", "rest_ms: @0", "contractions[0].rest_ms", "rest"},
    {T, "frequency_pps: 30, ", "", "contractions[0].frequency_pps", "gaps_ms"},
    {T, "hold_ms: 1000, ", "", "contractions[0].hold_ms", "absent"},
    {T, "opening: doublet", "opening_gap_ms: @40, opening: doublet", "contractions[0].opening_gap_ms",
     "period"},
    {T, "[5, 40]", "[5, @0]", "contractions[1].gaps_ms", "0"},
    {T, "[5, 40]", "[5, 40], hold_ms: @100", "contractions[1].hold_ms", "gaps_ms"},
    {T, "[5, 40]", "[]", "contractions[1].gaps_ms", "1"},
    {T, "current_ma: 60, hold", "current_ma: @-60, hold", "contractions[0].current_ma", "-60"},
    /* recordings */
    {R, "kind: force", "kind: @power", "recordings[0].kind", "staircase"},
    {R, "unit: N}", "unit: @kN}", "recordings[0].signal.unit", "lbf"},
    {R, "time_unit: s", "time_unit: @h", "recordings[0].signal.time_unit", "ms"},
    {R, "unit: N}", "unit: V}", "recordings[0].signal.per_volt", "V"},
    {R, "{file: pulses.csv}", "{file: pulses.csv, train: t.yaml}", "recordings[0].pulses", "one of"},
    {R, "use: fit", "use: @test", "recordings[0].use", "hold-out"},
    /* what YAML has and a document may not */
    {D, "target_n: 150", "target_n: &a 150\ntolerance_percent: *a", "", ""},
    {D, "target_n: 150", "target_n: !!float 150", "", ""},
    {D, "warm_up: 3\n", "warm_up: 3\n---\nformat: pulsewright-demand-1\n", "", ""},
    {D, "kind: hold", "kind: [hold", "", ""},
    {D, "muscle: quadriceps", "muscle: \"quad\\u0007riceps\"", "muscle", ""},
};

/* The sound text with the change; where @ stood. */
static void change(const struct bad *bad, char text[TEXT_SIZE], int *line, int *column)
{
    const char *base = sound[bad->kind], *at = strstr(base, bad->find);
    assert_non_null(at);
    (void)snprintf(text, TEXT_SIZE, "%.*s%s%s", (int)(at - base), base, bad->change, at + strlen(bad->find));
    char *mark = strchr(text, '@');
    *line = *column = 0;
    if (!mark) return;
    *line = *column = 1;
    for (const char *c = text; c < mark; c++) {
        *column = *c == '\n' ? 1 : *column + 1;
        *line += *c == '\n' ? 1 : 0;
    }
    memmove(mark, mark + 1, strlen(mark));
}

static bool is_told(const struct bad *bad, int line, int column, const char *text)
{
    char wanted[TEXT_SIZE];
    int told_line = 0, told_column = 0, used = 0;
    if (sscanf(text, "bad.yaml:%d:%d: %n", &told_line, &told_column, &used) != 2 || used == 0) return false;
    (void)snprintf(wanted, sizeof wanted, "%s", bad->key);
    if (strncmp(text + used, wanted, strlen(wanted)) != 0 || strchr(text, '\n')) return false;
    if (line && (line != told_line || column != told_column)) return false;
    return told_line >= 1 && told_column >= 1 && strstr(text + used, bad->phrase) != NULL;
}

static void every_bad_document_is_told_by_place_key_and_what_it_may_hold(void **state)
{
    (void)state;
    char text[TEXT_SIZE];
    int failures = 0, line = 0, column = 0;
    for (size_t i = 0; i < sizeof bads / sizeof bads[0]; i++) {
        change(&bads[i], text, &line, &column);
        struct document_bytes bytes = {.path = "bad.yaml", .data = text, .size = strlen(text)};
        struct message why = {.text = ""};
        const enum status status = read_kind(bads[i].kind, &bytes, &why);
        if (status == STATUS_DOCUMENT && is_told(&bads[i], line, column, why.text)) continue;
        failures++;
        print_error("row %zu (%s): status %d, %d:%d %s \"%s\": %s\n", i, bads[i].change, (int)status, line,
                    column, bads[i].key, bads[i].phrase, why.text);
    }
    assert_int_equal(failures, 0);
}

static void the_unchanged_documents_are_sound(void **state)
{
    (void)state;
    for (int kind = 0; kind < KINDS; kind++) {
        char text[TEXT_SIZE];
        (void)snprintf(text, sizeof text, "%s", sound[kind]);
        struct document_bytes bytes = {.path = "sound.yaml", .data = text, .size = strlen(text)};
        struct message why = {.text = ""};
        assert_status(read_kind((enum document_kind)kind, &bytes, &why), STATUS_OK, &why);
    }
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(the_unchanged_documents_are_sound),
        cmocka_unit_test(every_bad_document_is_told_by_place_key_and_what_it_may_hold)};
    return cmocka_run_group_tests(tests, NULL, NULL) != 0;
}
