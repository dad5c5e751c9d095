/* Dose guard: worked values, and each figure at its limit and one above. */
#include "core/dose/dose.h"
#include "core/dose/ledger.h"
#include "core/dose/limits.h"
#include "support/near.h"

#include <math.h>
#include <string.h>

static struct dose_limits open_limits(void)
{
    struct dose_limits limits = dose_program_limits();
    limits.load_ohm = 1000;
    limits.mismatch_ppm = 10000;
    limits.interphase_us = 100;
    limits.slew_memory_ms = 3000;
    return limits;
}

/* Gives `count` equal pulses at a period; the first that breaks a figure ends it. */
static enum dose_figure give(const struct dose_limits *limits, struct dose_channel *channel,
                             uint32_t current_ua, uint16_t duration_us, uint64_t start_us, uint32_t period_us,
                             unsigned count)
{
    for (unsigned i = 0; i < count; i++) {
        const struct pulse pulse = {.at_us = start_us + (uint64_t)i * period_us,
                                    .current_ua = current_ua,
                                    .duration_us = duration_us};
        const struct dose_verdict verdict = dose_check(limits, channel, &pulse);
        if (verdict.figure != DOSE_NONE) return verdict.figure;
        dose_given(channel, &pulse);
    }
    return DOSE_NONE;
}

/* Worked values, computed by hand from the stated formulas: 140 mA, 300 us, 35 pps, 1 % mismatch. */
static void worked_values_of_a_cycling_setting(void **state)
{
    (void)state;
    const struct dose_limits limits = open_limits();
    struct dose_channel channel;
    dose_init(&channel);
    assert_int_equal(give(&limits, &channel, 140000, 300, 0, 28572, 34), DOSE_NONE);
    const struct pulse pulse = {.at_us = 34 * 28572u, .current_ua = 140000, .duration_us = 300};
    uint64_t value[DOSE_FIGURES], limit[DOSE_FIGURES];
    dose_measure(&limits, &channel, &pulse, value, limit);
    assert_int_equal(value[DOSE_CHARGE], 42000000);
    assert_int_equal(value[DOSE_RATE], 35);
    assert_near((double)value[DOSE_RMS] / 1e3, 20.3, 0.05, 0);
    assert_int_equal(value[DOSE_ENERGY], 5880);
    assert_int_equal(value[DOSE_NET_DC], 14700);
}

/* 200 mA, 1 ms, 100 pps: 89.4 mA r.m.s., refused. The 50 mA ceiling is reached at 32 pulses of 80 mA^2 s. */
static void rms_above_the_ceiling_is_refused(void **state)
{
    (void)state;
    struct dose_limits limits = open_limits();
    limits.charge_pc = 200000000;
    struct dose_channel channel;
    dose_init(&channel);
    assert_int_equal(give(&limits, &channel, 200000, 1000, 0, 10000, 100), DOSE_RMS);
    assert_int_equal(channel.window_count, 31); /* 31 * 2 * 0.2^2 * 1e-3 = 2.48e-3 <= 2.5e-3 A^2 s */
}

static void window_is_half_open(void **state)
{
    (void)state;
    struct dose_limits limits = open_limits();
    limits.rate = 2;
    struct dose_channel channel;
    dose_init(&channel);
    assert_int_equal(give(&limits, &channel, 20000, 200, 0, 500000, 2), DOSE_NONE);
    struct pulse pulse = {.at_us = 999999, .current_ua = 20000, .duration_us = 200};
    assert_int_equal(dose_check(&limits, &channel, &pulse).figure, DOSE_RATE);
    pulse.at_us = 1000000; /* the pulse at 0 has left (t - 1 s, t] */
    assert_int_equal(dose_check(&limits, &channel, &pulse).figure, DOSE_NONE);
}

static void opening_extras_are_not_counted_but_two_a_train_at_most(void **state)
{
    (void)state;
    struct dose_limits limits = open_limits();
    limits.rate = 1;
    struct dose_channel channel;
    dose_init(&channel);
    for (unsigned i = 0; i < 4; i++) {
        const struct pulse pulse = {
            .at_us = i * 5000u, .current_ua = 20000, .duration_us = 200, .opening_extra = i > 0};
        assert_int_equal(dose_check(&limits, &channel, &pulse).figure, i < 3 ? DOSE_NONE : DOSE_RATE);
        dose_given(&channel, &pulse);
    }
}

static void each_static_figure_at_its_limit_and_one_above(void **state)
{
    (void)state;
    struct dose_limits limits = open_limits();
    struct dose_channel channel;
    dose_init(&channel);
    limits.current_ua = 60000;
    limits.duration_us = 400;
    struct pulse pulse = {.at_us = 0, .current_ua = 60000, .duration_us = 400};
    assert_int_equal(dose_check(&limits, &channel, &pulse).figure, DOSE_NONE);
    pulse.current_ua++;
    assert_int_equal(dose_check(&limits, &channel, &pulse).figure, DOSE_CURRENT);
    pulse.current_ua--;
    pulse.duration_us++;
    assert_int_equal(dose_check(&limits, &channel, &pulse).figure, DOSE_DURATION);
    pulse.duration_us--;
    limits.charge_pc = 24000000;
    assert_int_equal(dose_check(&limits, &channel, &pulse).figure, DOSE_NONE);
    limits.charge_pc--;
    assert_int_equal(dose_check(&limits, &channel, &pulse).figure, DOSE_CHARGE);
    limits = open_limits();
    limits.energy_uj = 1440; /* 2 * 0.06^2 * 500 * 400e-6 J */
    assert_int_equal(dose_check(&limits, &channel, &pulse).figure, DOSE_NONE);
    limits.energy_uj--;
    assert_int_equal(dose_check(&limits, &channel, &pulse).figure, DOSE_ENERGY);
    limits = open_limits();
    limits.voltage_mv = 60000;
    assert_int_equal(dose_check(&limits, &channel, &pulse).figure, DOSE_NONE);
    limits.load_ohm++;
    assert_int_equal(dose_check(&limits, &channel, &pulse).figure, DOSE_VOLTAGE);
    limits = open_limits();
    limits.net_dc_na = 240; /* 24 uC a second at 1 % */
    assert_int_equal(dose_check(&limits, &channel, &pulse).figure, DOSE_NONE);
    limits.net_dc_na--;
    assert_int_equal(dose_check(&limits, &channel, &pulse).figure, DOSE_NET_DC);
}

static void gap_is_the_greater_of_limit_and_pulse_length(void **state)
{
    (void)state;
    struct dose_limits limits = open_limits();
    struct dose_channel channel;
    dose_init(&channel);
    assert_int_equal(give(&limits, &channel, 20000, 200, 0, 1, 1), DOSE_NONE);
    struct pulse pulse = {.at_us = 1999, .current_ua = 20000, .duration_us = 200};
    assert_int_equal(dose_check(&limits, &channel, &pulse).figure, DOSE_GAP);
    pulse.at_us = 2000;
    assert_int_equal(dose_check(&limits, &channel, &pulse).figure, DOSE_NONE);
    limits.recovery_us = 5000; /* 200 + 100 + 5000 + 500 */
    pulse.at_us = 5799;
    assert_int_equal(dose_check(&limits, &channel, &pulse).figure, DOSE_GAP);
    pulse.at_us = 5800;
    assert_int_equal(dose_check(&limits, &channel, &pulse).figure, DOSE_NONE);
}

static void slew_lets_the_known_return_at_once_and_the_new_come_slowly(void **state)
{
    (void)state;
    struct dose_limits limits = open_limits();
    limits.first_pc = 5000000;
    limits.slew_pc_per_ms = 20000; /* 20 uC/s */
    limits.step_pc = 100000;
    struct dose_channel channel;
    dose_init(&channel);
    /* first: 5 uC, or the rise of 250 ms, which is 5 uC as well */
    struct pulse pulse = {.at_us = 10000000, .current_ua = 50000, .duration_us = 100};
    assert_int_equal(dose_check(&limits, &channel, &pulse).figure, DOSE_NONE);
    pulse.current_ua++;
    assert_int_equal(dose_check(&limits, &channel, &pulse).figure, DOSE_SLEW);
    pulse.current_ua = 50000;
    dose_given(&channel, &pulse);
    /* 40 ms later: 5 uC and 0.8 more */
    assert_int_equal(dose_slew_allowed_pc(&limits, &channel, 10040000), 5800000);
    /* 1 ms later the step is more than the rise */
    assert_int_equal(dose_slew_allowed_pc(&limits, &channel, 10001000), 5100000);
    pulse.at_us = 10040000;
    pulse.current_ua = 58000;
    dose_given(&channel, &pulse);
    /* within the memory what was given may be given again, a rise of at most 250 ms on top */
    assert_int_equal(dose_slew_allowed_pc(&limits, &channel, 12400000), 5800000 + 5000000);
    /* after it only the first charge */
    assert_int_equal(dose_slew_allowed_pc(&limits, &channel, 13600000), 5000000);
}

static void on_time_ends_with_quarter_second_of_silence(void **state)
{
    (void)state;
    struct dose_limits limits = open_limits();
    limits.on_us = 1000000;
    struct dose_channel channel;
    dose_init(&channel);
    assert_int_equal(give(&limits, &channel, 20000, 200, 0, 100000, 11), DOSE_NONE);
    struct pulse pulse = {.at_us = 1100000, .current_ua = 20000, .duration_us = 200};
    assert_int_equal(dose_check(&limits, &channel, &pulse).figure, DOSE_ON_TIME);
    pulse.at_us = 1249999;
    assert_int_equal(dose_check(&limits, &channel, &pulse).figure, DOSE_ON_TIME);
    pulse.at_us = 1250000;
    assert_int_equal(dose_check(&limits, &channel, &pulse).figure, DOSE_NONE);
}

static void duty_counts_after_a_minute(void **state)
{
    (void)state;
    struct dose_limits limits = open_limits();
    limits.duty_permille = 500;
    struct dose_channel channel;
    dose_init(&channel);
    dose_session(&channel, 0, 0, 0);
    assert_int_equal(give(&limits, &channel, 20000, 200, 0, 100000, 600), DOSE_NONE); /* up to 59.9 s */
    const struct pulse pulse = {.at_us = 60000000, .current_ua = 20000, .duration_us = 200};
    assert_int_equal(dose_check(&limits, &channel, &pulse).figure, DOSE_DUTY);
    /* silence until the on-time of 59.9 s is half of the session */
    struct pulse later = {.at_us = 119799999, .current_ua = 20000, .duration_us = 200};
    assert_int_equal(dose_check(&limits, &channel, &later).figure, DOSE_DUTY);
    later.at_us = 119800000;
    assert_int_equal(dose_check(&limits, &channel, &later).figure, DOSE_NONE);
}

static void session_totals_are_bounded(void **state)
{
    (void)state;
    struct dose_limits limits = open_limits();
    limits.session_pulses = 10;
    limits.session_us = 2000000;
    struct dose_channel channel;
    dose_init(&channel);
    dose_session(&channel, 0, 8, 0);
    assert_int_equal(give(&limits, &channel, 20000, 200, 0, 100000, 3), DOSE_SESSION_PULSES);
    limits.session_pulses = 100;
    limits.session_charge_pc = channel.session_charge_pc + 4000000;
    struct pulse pulse = {.at_us = 2000000, .current_ua = 20000, .duration_us = 200};
    assert_int_equal(dose_check(&limits, &channel, &pulse).figure, DOSE_NONE);
    limits.session_charge_pc--;
    assert_int_equal(dose_check(&limits, &channel, &pulse).figure, DOSE_SESSION_CHARGE);
    pulse.at_us++;
    limits.session_charge_pc++;
    assert_int_equal(dose_check(&limits, &channel, &pulse).figure, DOSE_SESSION_TIME);
}

static void zero_current_is_silence(void **state)
{
    (void)state;
    struct dose_limits limits = open_limits();
    struct dose_channel channel;
    dose_init(&channel);
    limits.session_pulses = 0;
    const struct pulse pulse = {.at_us = 5, .current_ua = 0, .duration_us = 200};
    assert_int_equal(dose_check(&limits, &channel, &pulse).figure, DOSE_NONE);
    dose_given(&channel, &pulse);
    assert_false(channel.any);
}

static void effective_limits_are_the_strictest_with_their_source(void **state)
{
    (void)state;
    const struct dose_device device = {.current_to_ma = 110,
                                       .duration_to_us = 800,
                                       .frequency_to_pps = 100,
                                       .gap_us_min = 4000,
                                       .interphase_us = 100,
                                       .recovery_us = (double)NAN,
                                       .mismatch_percent = 1,
                                       .compliance_v = 150,
                                       .load_ohm = 1000,
                                       .current_step_ma = 0.5,
                                       .duration_step_us = 5};
    struct person_limits person;
    memset(&person, 0xff, sizeof person); /* all NAN */
    person.current_ma = 80;
    person.charge_uc = 40;
    person.gap_us = 3000;
    person.duty_percent = 33.37;
    struct dose_limits limits;
    const char *source[DOSE_FIGURES];
    limits_effective(&device, &person, &limits, source);
    assert_int_equal(limits.current_ua, 80000);
    assert_string_equal(source[DOSE_CURRENT], "person");
    assert_int_equal(limits.duration_us, 800);
    assert_string_equal(source[DOSE_DURATION], "stimulator");
    assert_int_equal(limits.rms_ua, 50000);
    assert_string_equal(source[DOSE_RMS], "program");
    assert_int_equal(limits.gap_us, 4000); /* for gaps the largest */
    assert_string_equal(source[DOSE_GAP], "stimulator");
    assert_int_equal(limits.duty_permille, 333); /* rounded against the user */
    assert_int_equal(limits.slew_memory_ms, 3000);
}

/* Worked values: 140 mA, 300 us, 35 pps, 45 cm2: 0.93 uC/cm2, 0.45 mA/cm2, 4.6 mW/cm2; 50 mA, 400 us, 40 pps,
 * 5 cm2: 1.79 mA/cm2. */
static void ledger_shows_the_worked_densities(void **state)
{
    (void)state;
    struct ledger_channel channel = {
        .channel = 1, .limits = open_limits(), .pad_cm2 = 45, .return_pad_cm2 = (double)NAN};
    const struct segment segment = {.start_us = 0,
                                    .period_us = 28572,
                                    .current_from_ua = 140000,
                                    .current_to_ua = 140000,
                                    .count = 70,
                                    .duration_from_us = 300,
                                    .duration_to_us = 300,
                                    .channel = 1,
                                    .opening = 1};
    const struct train_grid grid = {0};
    struct ledger ledger;
    struct message why;
    assert_status(ledger_make(&segment, 1, &grid, &channel, 1, &ledger, &why), STATUS_OK, &why);
    assert_true(ledger.within);
    assert_int_equal(ledger.pulses, 70);
    assert_near(ledger.charge_total_uc, 2940, 1e-9, 0);
    assert_string_equal(ledger.shown_figure[0].name, "rms_density");
    assert_near(ledger.shown_figure[0].value, 0.45, 0.005, 0);
    assert_near(ledger.shown_figure[1].value, 4.6, 0.05, 0);
    assert_near(ledger.shown_figure[2].value, 0.93, 0.005, 0);
    bool attention = false;
    for (size_t i = 0; i < ledger.figures; i++)
        attention |= ledger.figure[i].figure == DOSE_NET_DC && ledger.figure[i].attention;
    assert_true(attention);
    ledger_free(&ledger);
    channel.pad_cm2 = 5;
    const struct segment strong = {.start_us = 0,
                                   .period_us = 25000,
                                   .current_from_ua = 50000,
                                   .current_to_ua = 50000,
                                   .count = 80,
                                   .duration_from_us = 400,
                                   .duration_to_us = 400,
                                   .channel = 1,
                                   .opening = 1};
    assert_status(ledger_make(&strong, 1, &grid, &channel, 1, &ledger, &why), STATUS_OK, &why);
    assert_near(ledger.shown_figure[0].value, 1.79, 0.005, 0);
    ledger_free(&ledger);
}

/* Shannon 1992: k = log10 D + log10 Q; Q 1 uC on 0.06 cm2 gives D 16.67, k 1.222. */
static void ledger_shows_shannon_k(void **state)
{
    (void)state;
    const struct ledger_channel channel = {
        .channel = 2, .limits = open_limits(), .pad_cm2 = 0.06, .return_pad_cm2 = (double)NAN};
    const struct segment segment = {.period_us = 100000,
                                    .current_from_ua = 5000,
                                    .current_to_ua = 5000,
                                    .count = 3,
                                    .duration_from_us = 200,
                                    .duration_to_us = 200,
                                    .channel = 2,
                                    .opening = 1};
    const struct train_grid grid = {0};
    struct ledger ledger;
    struct message why;
    assert_status(ledger_make(&segment, 1, &grid, &channel, 1, &ledger, &why), STATUS_OK, &why);
    assert_near(ledger.shown_figure[2].value, 16.67, 0.005, 0);
    assert_near(ledger.shown_figure[3].value, 1.222, 0.0005, 0);
    ledger_free(&ledger);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(worked_values_of_a_cycling_setting),
        cmocka_unit_test(rms_above_the_ceiling_is_refused),
        cmocka_unit_test(window_is_half_open),
        cmocka_unit_test(opening_extras_are_not_counted_but_two_a_train_at_most),
        cmocka_unit_test(each_static_figure_at_its_limit_and_one_above),
        cmocka_unit_test(gap_is_the_greater_of_limit_and_pulse_length),
        cmocka_unit_test(slew_lets_the_known_return_at_once_and_the_new_come_slowly),
        cmocka_unit_test(on_time_ends_with_quarter_second_of_silence),
        cmocka_unit_test(duty_counts_after_a_minute),
        cmocka_unit_test(session_totals_are_bounded),
        cmocka_unit_test(zero_current_is_silence),
        cmocka_unit_test(effective_limits_are_the_strictest_with_their_source),
        cmocka_unit_test(ledger_shows_the_worked_densities),
        cmocka_unit_test(ledger_shows_shannon_k),
    };
    return cmocka_run_group_tests(tests, NULL, NULL) != 0;
}
