/* Host and device on a simulated clock: survived faults leave every pulse as planned; fatal ones end the
 * output within the lease and a pulse, the cause is told, nothing resumes. */
#include "../simulation.h"

enum { LEASE_US = 200000, PERIOD_US = 33334 };

static void whole_image_is_delivered_to_the_pulse(void **state)
{
    (void)state;
    struct simulation s = {0};
    uint64_t first_us = 0, last_us = 0;
    simulation_make_image(&s, 10, 20);
    simulation_begin(&s, NULL, NULL);
    simulation_run(&s, s.now_us + 40000000);
    if (host_phase(s.host) != HOST_FINISHED) print_error("ended: %s\n", host_end_text(s.host));
    assert_int_equal(host_phase(s.host), HOST_FINISHED);
    assert_int_equal(simulation_delivered(&s, true, &first_us, &last_us), s.image.header.pulses);
    assert_true(host_totals_exact(s.host));
    assert_int_equal(host_totals(s.host, 1).pulses, s.image.header.pulses);
    assert_int_equal(host_totals(s.host, 1).charge_pc, s.image.header.pulses * 40000 * 300);
    simulation_end(&s);
}

/* Any one frame dropped, corrupted, duplicated or delayed to 80 ms, at drawn moments, either way: delivered =
 * plan. Seed 20261201. */
static void any_single_fault_of_the_line_is_survived(void **state)
{
    (void)state;
    static const char *const actions[] = {"drop", "corrupt", "duplicate", "delay"};
    srand(20261201);
    for (int i = 0; i < 40; i++) {
        struct simulation s = {0};
        char csv[200];
        uint64_t first_us = 0, last_us = 0;
        const int action = i % 4;
        const char *direction = action == 3 || rand() % 2 ? "in" : "out";
        (void)snprintf(csv, sizeof csv, "at_ms,direction,action,argument\n%d,%s,%s,%d\n", rand() % 9000,
                       direction, actions[action], 10 + rand() % 71);
        simulation_make_image(&s, 6, 20);
        simulation_begin(&s, csv, NULL);
        simulation_run(&s, s.now_us + 40000000);
        if (host_phase(s.host) != HOST_FINISHED) print_error("%sended: %s\n", csv, host_end_text(s.host));
        assert_int_equal(host_phase(s.host), HOST_FINISHED);
        assert_int_equal(simulation_delivered(&s, true, &first_us, &last_us), s.image.header.pulses);
        simulation_end(&s);
    }
}

/* The host falls silent at a drawn moment: the last pulse lies within the lease. */
static void host_that_freezes_ends_the_pulses_within_the_lease(void **state)
{
    (void)state;
    srand(7);
    for (int i = 0; i < 20; i++) {
        struct simulation s = {0};
        uint64_t first_us = 0, last_us = 0;
        simulation_make_image(&s, 10, 40);
        simulation_begin(&s, NULL, NULL);
        simulation_until_running(&s);
        simulation_run(&s, s.now_us + 300000 + (uint64_t)(rand() % 3000000));
        s.host_frozen = true;
        const uint64_t frozen_us = s.now_us;
        simulation_run(&s, s.now_us + 5000000);
        assert_true(simulation_delivered(&s, true, &first_us, &last_us) > 0);
        assert_true(last_us <= frozen_us + LEASE_US + PERIOD_US);
        assert_true(twin_is_silent(s.twin));
        simulation_end(&s);
    }
}

static void fatal_faults_end_in_zero_and_are_told(void **state)
{
    (void)state;
    static const struct {
        const char *row, *told;
    } faults[] = {{"3000,in,cut,\n", "no answer"},
                  {"3000,in,stall,400\n", "quiet"},
                  {"3000,in,reset,\n", "no answer"},
                  {"3000,in,interlock,\n", "interlock"}};
    for (size_t i = 0; i < sizeof faults / sizeof faults[0]; i++) {
        struct simulation s = {0};
        char csv[120];
        uint64_t first_us = 0, last_us = 0;
        (void)snprintf(csv, sizeof csv, "at_ms,direction,action,argument\n%s", faults[i].row);
        simulation_make_image(&s, 10, 40);
        simulation_begin(&s, csv, NULL);
        const uint64_t begin_us = s.now_us;
        simulation_run(&s, s.now_us + 30000000);
        assert_int_equal(host_phase(s.host), HOST_FAILED);
        if (!strstr(host_end_text(s.host), faults[i].told))
            print_error("%s told: %s\n", faults[i].row, host_end_text(s.host));
        assert_non_null(strstr(host_end_text(s.host), faults[i].told));
        assert_true(simulation_delivered(&s, true, &first_us, &last_us) > 0);
        assert_true(last_us <= begin_us + 3000000 + LEASE_US + PERIOD_US + 1000);
        s.host_frozen = true;
        simulation_run(&s, s.now_us + 5000000); /* nothing resumes by itself */
        uint64_t later_us = 0;
        (void)simulation_delivered(&s, true, &first_us, &later_us);
        assert_true(later_us == last_us);
        simulation_end(&s);
    }
}

static void stop_request_ends_in_zero_within_sixty_milliseconds(void **state)
{
    (void)state;
    srand(3);
    for (int i = 0; i < 20; i++) {
        struct simulation s = {0};
        uint64_t first_us = 0, last_us = 0;
        simulation_make_image(&s, 10, 40);
        simulation_begin(&s, NULL, NULL);
        simulation_until_running(&s);
        simulation_run(&s, s.now_us + 300000 + (uint64_t)(rand() % 3000000));
        host_request_stop(s.host);
        const uint64_t asked_us = s.now_us;
        simulation_run(&s, s.now_us + 5000000);
        assert_int_equal(host_phase(s.host), HOST_STOPPED);
        assert_true(host_output_known_zero(s.host));
        (void)simulation_delivered(&s, true, &first_us, &last_us);
        assert_true(last_us <= asked_us + 60000);
        simulation_end(&s);
    }
}

static void eased_pulses_are_lower_and_never_above_what_was_signed(void **state)
{
    (void)state;
    struct simulation s = {0};
    uint64_t first_us = 0, last_us = 0;
    simulation_make_image(&s, 6, 30);
    simulation_begin(&s, NULL, NULL);
    simulation_until_running(&s);
    simulation_run(&s, s.now_us + 1000000);
    host_ease(s.host, EASE_ALL, 500);
    simulation_run(&s, s.now_us + 2000000);
    host_ease(s.host, EASE_ALL, 1000);
    simulation_run(&s, s.now_us + 30000000);
    assert_int_equal(host_phase(s.host), HOST_FINISHED);
    assert_int_equal(simulation_delivered(&s, false, &first_us, &last_us), s.image.header.pulses);
    assert_true(host_totals(s.host, 1).charge_pc < s.image.header.pulses * 40000 * 300);
    FILE *in = fopen(s.log, "r");
    char line[128];
    unsigned half = 0, full = 0;
    while (fgets(line, sizeof line, in)) {
        unsigned long current_ua = 0;
        if (sscanf(line, "%*u,%*u,%*u,%lu", &current_ua) != 1) continue;
        assert_true(current_ua <= 40000);
        half += current_ua == 20000;
        full += current_ua == 40000;
    }
    fclose(in);
    assert_true(half > 30 && full > 30);
    simulation_end(&s);
}

static void twins_muscle_answers_with_force(void **state)
{
    (void)state;
    struct simulation s = {0};
    struct profile profile;
    struct message why;
    assert_status(profile_load(PULSEWRIGHT_SOURCE "/profiles/people/p-001.yaml", &profile, &why), STATUS_OK,
                  &why);
    simulation_make_image(&s, 3, 30);
    simulation_begin(&s, NULL, &profile);
    simulation_run(&s, s.now_us + 30000000);
    assert_int_equal(host_phase(s.host), HOST_FINISHED);
    assert_true(s.forces > 300);
    assert_between(s.force_greatest_n, 100, 350); /* a tetanus of this invented person at this strength */
    simulation_end(&s);
    profile_free(&profile);
}

static void a_changed_segment_is_a_fault_before_any_of_its_pulses(void **state)
{
    (void)state;
    struct simulation s = {0};
    uint64_t first_us = 0, last_us = 0;
    simulation_make_image(&s, 6, 20);
    s.segment[3].segment.current_to_ua += 500; /* after sealing: no longer what was signed */
    simulation_begin(&s, NULL, NULL);
    simulation_run(&s, s.now_us + 30000000);
    assert_int_equal(host_phase(s.host), HOST_FAILED);
    assert_non_null(strstr(host_end_text(s.host), "signed"));
    assert_int_equal(simulation_delivered(&s, false, &first_us, &last_us), 0);
    simulation_end(&s);
}

static void another_device_is_not_armed(void **state)
{
    (void)state;
    struct simulation s = {0};
    simulation_make_image(&s, 2, 20);
    s.image.identity.unit[0] = 'X';
    image_seal(&s.image);
    simulation_begin(&s, NULL, NULL);
    simulation_run(&s, s.now_us + 30000000);
    assert_int_equal(host_phase(s.host), HOST_FAILED);
    assert_non_null(strstr(host_end_text(s.host), "not the one"));
    simulation_end(&s);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(whole_image_is_delivered_to_the_pulse),
        cmocka_unit_test(any_single_fault_of_the_line_is_survived),
        cmocka_unit_test(host_that_freezes_ends_the_pulses_within_the_lease),
        cmocka_unit_test(fatal_faults_end_in_zero_and_are_told),
        cmocka_unit_test(stop_request_ends_in_zero_within_sixty_milliseconds),
        cmocka_unit_test(eased_pulses_are_lower_and_never_above_what_was_signed),
        cmocka_unit_test(twins_muscle_answers_with_force),
        cmocka_unit_test(a_changed_segment_is_a_fault_before_any_of_its_pulses),
        cmocka_unit_test(another_device_is_not_armed),
    };
    return cmocka_run_group_tests(tests, NULL, NULL) != 0;
}
