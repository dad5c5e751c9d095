/* The device on a simulated clock, without a host: the state table, row by row, and what it refuses. The
 * clock starts 5 s before 2^32 us. */
#include "board.h"

static void signed_pulses_are_given_in_their_order_and_it_ends_safe(void **state)
{
    (void)state;
    until_running();
    advance_renewing(4000000);
    assert_int_equal(board.pulses, 30);
    for (unsigned i = 0; i < 30; i++)
        assert_true(board.pulse[i].at_us - board.pulse[0].at_us == 1000000u * (i / 10) + 50000u * (i % 10));
    assert_int_equal(device.state, DEVICE_SAFE);
    assert_int_equal(device.cause, CAUSE_NONE); /* finished latches nothing */
}

static void each_step_is_refused_out_of_its_state(void **state)
{
    (void)state;
    begin();
    assert_int_equal(arm(), REASON_STATE);
    assert_int_equal(confirm(), REASON_STATE);
    assert_int_equal(send_segment(1), REASON_STATE);
    assert_int_equal(start_in(100000), REASON_STATE);
    assert_int_equal(renew(1), REASON_STATE);
    assert_int_equal(limits(), REASON_NONE);
    assert_int_equal(limits(), REASON_STATE);
    assert_int_equal(confirm(), REASON_STATE);
    assert_int_equal(arm(), REASON_NONE);
    assert_int_equal(start_in(100000), REASON_STATE);
    assert_int_equal(confirm(), REASON_NONE);
    assert_int_equal(start_in(100000), REASON_NOT_HELD);
    assert_int_equal(send_segment(1), REASON_NONE);
    assert_int_equal(start_in(49999), REASON_TIME);
    assert_int_equal(start_in(2000001), REASON_TIME);
    assert_int_equal(board.pulses, 0);
}

static void limits_are_refused_in_the_first_second_and_with_a_cause(void **state)
{
    (void)state;
    begin();
    device_init(&device, &build, &platform, now_us);
    hello();
    assert_int_equal(limits(), REASON_RESET);
    advance(DEVICE_SETTLE_US);
    put(MESSAGE_STOP, &(struct message_stop){0}, 0, 0);
    assert_int_equal(device.cause, CAUSE_STOP);
    assert_int_equal(limits(), REASON_CAUSE);
    assert_int_equal(ask(MESSAGE_CLEAR, &(struct message_clear){.cause = CAUSE_LEASE}), REASON_CAUSE);
    assert_int_equal(ask(MESSAGE_CLEAR, &(struct message_clear){.cause = CAUSE_STOP}), REASON_NONE);
    assert_int_equal(limits(), REASON_NONE);
}

static void device_keeps_the_stricter_limits_and_another_root_is_refused(void **state)
{
    (void)state;
    begin();
    build.own_limits.current_ua = 50000; /* the hardware's own */
    assert_int_equal(limits(), REASON_NONE);
    union message_any said;
    struct dose_limits held;
    uint8_t channel;
    assert_true(message_decode(&answer, &said));
    assert_true(image_limits_decode(said.done.detail, said.done.size, &held, &channel));
    assert_int_equal(held.current_ua, 50000);
    assert_int_equal(arm(), REASON_NONE);
    assert_int_equal(confirm(), REASON_ROOT);
    advance(DEVICE_ARMING_US_MAX);
    zero_from_here_on(CAUSE_NOT_CONFIRMED);
}

static void stop_in_every_state_ends_in_safe(void **state)
{
    (void)state;
    for (int depth = 0; depth < 5; depth++) {
        begin();
        if (depth > 0) assert_int_equal(limits(), REASON_NONE);
        if (depth > 1) assert_int_equal(arm(), REASON_NONE);
        if (depth > 2) assert_int_equal(confirm(), REASON_NONE);
        if (depth > 3) {
            for (unsigned i = 1; i <= SEGMENTS + 1; i++) assert_int_equal(send_segment(i), REASON_NONE);
            assert_int_equal(start_in(100000), REASON_NONE);
            advance(150000);
            assert_true(board.pulses > 0);
        }
        for (int i = 0; i < 3; i++)
            put(MESSAGE_STOP, &(struct message_stop){0}, 0xDEAD,
                0x55); /* of any session, any number of times */
        zero_from_here_on(CAUSE_STOP);
    }
}

static void lease_that_is_not_renewed_ends_the_pulses_in_time(void **state)
{
    (void)state;
    until_running();
    const uint64_t confirmed_us = now_us;
    advance(2000000);
    zero_from_here_on(CAUSE_LEASE);
    assert_true(board.pulses > 0 && board.pulse[board.pulses - 1].at_us < confirmed_us + DEVICE_LEASE_US);
}

static void old_echo_does_not_lengthen_the_lease(void **state)
{
    (void)state;
    until_running();
    const uint64_t echo_us = last_clock();
    advance(150000);
    assert_int_equal(renew(echo_us), REASON_NONE); /* an echo of 150 ms ago gives 50 ms more */
    const unsigned before = board.pulses;
    advance(60000);
    assert_int_equal(device.state, DEVICE_SAFE);
    assert_int_equal(device.cause, CAUSE_LEASE);
    assert_true(board.pulses <= before + 1);
}

static void renew_with_an_echo_that_was_never_sent_is_a_fault(void **state)
{
    (void)state;
    until_running();
    assert_int_equal(renew(now_us + 10), 999);
    zero_from_here_on(CAUSE_ECHO);
    until_running();
    assert_int_equal(renew(now_us - 12345), 999);
    zero_from_here_on(CAUSE_ECHO);
}

static void wrong_hash_is_a_fault_and_a_gap_is_not(void **state)
{
    (void)state;
    until_armed();
    assert_int_equal(send_segment(2), REASON_NEXT_IS);
    assert_int_equal(send_segment(1), REASON_NONE);
    assert_int_equal(send_segment(1), REASON_NONE); /* a repeat of what was taken is done already */
    assert_int_equal(device.next_index, 2);
    segments[1].segment.duration_to_us = 305;
    assert_int_equal(send_segment(2), 999);
    assert_int_equal(fault.cause, CAUSE_HASH);
    zero_from_here_on(CAUSE_HASH);
}

static void late_pulse_is_a_fault_and_is_not_given(void **state)
{
    (void)state;
    until_running();
    const unsigned before = board.pulses;
    now_us += 100000 + DEVICE_LATE_US_MAX + 1; /* the timer slept past the first pulse */
    device_step(&device, now_us);
    assert_int_equal(board.pulses, before);
    zero_from_here_on(CAUSE_LATE);
}

static void pulse_beyond_a_locked_limit_is_a_fault_whatever_was_signed(void **state)
{
    (void)state;
    begin();
    image.limits[0].current_ua = 39999;
    image_seal(&image);
    assert_int_equal(limits(), REASON_NONE);
    assert_int_equal(arm(), REASON_NONE);
    assert_int_equal(confirm(), REASON_NONE);
    for (unsigned i = 1; i <= SEGMENTS + 1; i++) assert_int_equal(send_segment(i), REASON_NONE);
    assert_int_equal(start_in(100000), REASON_NONE);
    advance(150000);
    assert_int_equal(board.pulses, 0);
    assert_int_equal(fault.figure, DOSE_CURRENT);
    zero_from_here_on(CAUSE_LIMIT);
}

static void missing_segment_is_an_underrun(void **state)
{
    (void)state;
    until_armed();
    assert_int_equal(send_segment(1), REASON_NONE);
    assert_int_equal(send_segment(2), REASON_NONE);
    assert_int_equal(start_in(100000), REASON_NONE);
    advance_renewing(3000000);
    zero_from_here_on(CAUSE_UNDERRUN);
    assert_true(board.pulses <= 11); /* the newest segment's own start is not passed */
}

static void open_interlock_force_and_measured_current_end_it(void **state)
{
    (void)state;
    until_running();
    board.interlock_open = true;
    advance(20000);
    zero_from_here_on(CAUSE_INTERLOCK);
    until_running();
    board.measures_wrong = true;
    advance_renewing(1000000);
    zero_from_here_on(CAUSE_MEASURED);
    assert_int_equal(board.pulses, DEVICE_MEASURED_OFF_MAX);
    begin();
    image.header.force_cap_mn[0] = 100000;
    image_seal(&image);
    assert_int_equal(limits(), REASON_NONE);
    assert_int_equal(arm(), REASON_NONE);
    assert_int_equal(confirm(), REASON_NONE);
    board.force_mn = 100000;
    advance(20000);
    assert_int_equal(device.state, DEVICE_ARMED); /* at the cap */
    board.force_mn = 100001;
    advance(20000);
    zero_from_here_on(CAUSE_FORCE);
}

static void silent_sensor_with_a_signed_cap_is_a_fault(void **state)
{
    (void)state;
    begin();
    image.header.force_cap_mn[0] = 100000;
    image_seal(&image);
    assert_int_equal(limits(), REASON_NONE);
    assert_int_equal(arm(), REASON_NONE);
    assert_int_equal(confirm(), REASON_NONE);
    advance(10000);
    board.sensor = false;
    advance(90000);
    assert_int_equal(device.state, DEVICE_ARMED);
    advance(30000);
    zero_from_here_on(CAUSE_SENSOR);
}

static void second_host_ends_the_first_ones_session(void **state)
{
    (void)state;
    until_running();
    put(MESSAGE_HELLO, &(struct message_hello){.nonce = nonce_hello}, 0,
        0); /* the same host again: answered, nothing changes */
    assert_int_equal(device.state, DEVICE_RUNNING);
    put(MESSAGE_HELLO, &(struct message_hello){.nonce = nonce_hello + 77}, 0, 0);
    zero_from_here_on(CAUSE_SECOND_HOST);
}

static void first_cause_is_latched(void **state)
{
    (void)state;
    until_running();
    board.interlock_open = true;
    advance(20000);
    put(MESSAGE_STOP, &(struct message_stop){0}, session, sequence++);
    assert_int_equal(device.cause, CAUSE_INTERLOCK);
}

static void frames_of_another_session_are_dropped(void **state)
{
    (void)state;
    until_armed();
    const unsigned before = answers;
    put(MESSAGE_EASE, &(struct message_ease){.channel = EASE_ALL, .thousandths = 0}, session + 1, sequence++);
    assert_int_equal(answers, before);
    assert_int_equal(device.channel[0].ease, EASE_FULL);
}

static void repeated_request_is_answered_again_and_not_done_twice(void **state)
{
    (void)state;
    begin();
    assert_int_equal(limits(), REASON_NONE);
    assert_int_equal(arm(), REASON_NONE);
    const uint64_t first_nonce = arm_nonce;
    sequence--; /* the very same frame once more */
    assert_int_equal(arm(), REASON_NONE);
    assert_true(arm_nonce == first_nonce);
    assert_int_equal(confirm(), REASON_NONE);
}

static void eight_damaged_frames_in_a_second_are_a_fault(void **state)
{
    (void)state;
    static const uint8_t damage[] = {0, 5, 1, 2, 3, 4, 0};
    until_running();
    for (int i = 0; i < 7; i++) device_octets(&device, now_us, damage, sizeof damage);
    assert_int_equal(device.state, DEVICE_RUNNING);
    device_octets(&device, now_us, damage, sizeof damage);
    zero_from_here_on(CAUSE_DAMAGED);
}

static void rehearsal_is_not_taken_by_a_device_that_is_no_twin(void **state)
{
    (void)state;
    begin();
    image.header.signoff = SIGNOFF_REHEARSAL;
    image_seal(&image);
    assert_int_equal(limits(), REASON_NONE);
    assert_int_equal(arm(), REASON_KIND);
    begin();
    build.twin = true;
    assert_int_equal(limits(), REASON_NONE);
    assert_int_equal(arm(), REASON_KIND); /* and the clinical kind not by a twin */
}

static void dose_is_kept_over_sessions(void **state)
{
    (void)state;
    until_running();
    advance_renewing(4000000);
    const uint64_t pulses = device.channel[0].dose.session_pulses;
    assert_int_equal(pulses, 30);
    hello();
    assert_int_equal(limits(), REASON_NONE);
    assert_int_equal(arm(), REASON_NONE);
    assert_true(device.channel[0].dose.session_pulses == pulses); /* the same person */
}

/* Octets at random, and valid frames at random, never make a pulse outside running, beyond the limits or
 * late. Seed 20261201. */
static void nothing_that_comes_over_the_wire_makes_a_pulse_that_was_not_armed(void **state)
{
    (void)state;
    srand(20261201);
    begin();
    for (int i = 0; i < 60000; i++) {
        struct frame frame = {.type = (uint8_t)(1 + rand() % 13),
                              .session = rand() % 2 ? session : (uint32_t)rand(),
                              .sequence = (uint16_t)rand(),
                              .size = (uint8_t)(rand() % 200)};
        uint8_t octets[FRAME_WIRE_MAX];
        for (unsigned k = 0; k < frame.size; k++) frame.payload[k] = (uint8_t)rand();
        if (frame.type == MESSAGE_STOP || frame.type == MESSAGE_DISARM || frame.type == MESSAGE_REPORT)
            frame.size = 0;
        const size_t size = frame_encode(&frame, octets);
        if (rand() % 4 == 0) octets[rand() % (int)size] ^= (uint8_t)(1 << rand() % 8);
        device_octets(&device, now_us, octets, size);
        advance((uint64_t)(rand() % 3000));
        if (device.cause != CAUSE_NONE && rand() % 8 == 0) {
            device.now_us = now_us;
            hello();
            (void)ask(MESSAGE_CLEAR, &(struct message_clear){.cause = (uint16_t)device.cause});
        }
    }
    assert_int_equal(board.pulses, 0); /* no root was ever confirmed */
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(signed_pulses_are_given_in_their_order_and_it_ends_safe),
        cmocka_unit_test(each_step_is_refused_out_of_its_state),
        cmocka_unit_test(limits_are_refused_in_the_first_second_and_with_a_cause),
        cmocka_unit_test(device_keeps_the_stricter_limits_and_another_root_is_refused),
        cmocka_unit_test(stop_in_every_state_ends_in_safe),
        cmocka_unit_test(lease_that_is_not_renewed_ends_the_pulses_in_time),
        cmocka_unit_test(old_echo_does_not_lengthen_the_lease),
        cmocka_unit_test(renew_with_an_echo_that_was_never_sent_is_a_fault),
        cmocka_unit_test(wrong_hash_is_a_fault_and_a_gap_is_not),
        cmocka_unit_test(late_pulse_is_a_fault_and_is_not_given),
        cmocka_unit_test(pulse_beyond_a_locked_limit_is_a_fault_whatever_was_signed),
        cmocka_unit_test(missing_segment_is_an_underrun),
        cmocka_unit_test(open_interlock_force_and_measured_current_end_it),
        cmocka_unit_test(silent_sensor_with_a_signed_cap_is_a_fault),
        cmocka_unit_test(second_host_ends_the_first_ones_session),
        cmocka_unit_test(first_cause_is_latched),
        cmocka_unit_test(frames_of_another_session_are_dropped),
        cmocka_unit_test(repeated_request_is_answered_again_and_not_done_twice),
        cmocka_unit_test(eight_damaged_frames_in_a_second_are_a_fault),
        cmocka_unit_test(rehearsal_is_not_taken_by_a_device_that_is_no_twin),
        cmocka_unit_test(dose_is_kept_over_sessions),
        cmocka_unit_test(nothing_that_comes_over_the_wire_makes_a_pulse_that_was_not_armed),
    };
    return cmocka_run_group_tests(tests, NULL, NULL) != 0;
}
