/* A board under the device's code, and a host of a few lines, for its tests: all on a simulated clock that
 * starts 5 s before 2^32 us. */
#ifndef PULSEWRIGHT_TESTS_BRIDGE_STIMULATOR_BOARD_H
#define PULSEWRIGHT_TESTS_BRIDGE_STIMULATOR_BOARD_H
#include "bridge/stimulator/device.h"
#include "bridge/wire/octets.h"
#include "support/near.h"

#include <stdlib.h>
#include <string.h>

enum { OUT_MAX = 1 << 16, PULSES_MAX = 4096, SEGMENTS = 3 };

static struct device device;
static struct device_build build;
static struct platform platform;
static struct {
    uint64_t fresh;
    bool interlock_open, sensor, measures_wrong, output_fails;
    int32_t force_mn;
    struct pulse pulse[PULSES_MAX];
    unsigned pulses, silences;
    uint32_t last_ua;
} board;
static struct frame_reader reader;
static struct frame answer; /* the last frame of any kind */
static struct message_fault fault;
static unsigned answers, faults;
static uint64_t now_us, nonce_hello, arm_nonce;
static uint32_t session;
static uint16_t sequence;
static struct image image;
static struct image_segment segments[SEGMENTS + 1];

static bool give(void *context, uint64_t at_us, uint8_t channel, uint32_t current_ua, uint16_t duration_us,
                 uint16_t interphase_us)
{
    (void)context;
    (void)interphase_us;
    assert_int_equal(device.state, DEVICE_RUNNING); /* no pulse outside running, ever */
    if (board.pulses < PULSES_MAX)
        board.pulse[board.pulses++] = (struct pulse){
            .at_us = at_us, .channel = channel, .current_ua = current_ua, .duration_us = duration_us};
    board.last_ua = current_ua;
    return !board.output_fails;
}
static bool measured(void *context, uint8_t channel, uint32_t *current_ua)
{
    (void)context;
    (void)channel;
    *current_ua = board.measures_wrong ? board.last_ua / 2 : board.last_ua;
    return true;
}
static bool force(void *context, uint64_t at_us, int32_t *force_mn)
{
    (void)context;
    (void)at_us;
    *force_mn = board.force_mn;
    return board.sensor;
}
static bool interlock(void *context)
{
    (void)context;
    return !board.interlock_open;
}
static uint64_t fresh64(void *context)
{
    (void)context;
    return ++board.fresh * 0x9E3779B97F4A7C15u;
}
static void hear(void *context, const uint8_t *octets, size_t size)
{
    struct frame frame;
    (void)context;
    for (size_t i = 0; i < size; i++) {
        if (!frame_reader_take(&reader, octets[i], &frame)) continue;
        union message_any message;
        assert_true(message_decode(&frame, &message));
        if (frame.type == MESSAGE_FAULT) {
            fault = message.fault;
            faults++;
        } else if (frame.type == MESSAGE_DONE || frame.type == MESSAGE_REFUSAL ||
                   frame.type == MESSAGE_IDENTITY || frame.type == MESSAGE_CLOCK_IS) {
            answer = frame;
            answers++;
        }
    }
}
static void silence(void *context)
{
    (void)context;
    board.silences++;
}
static void feed(void *context)
{
    (void)context;
}

static void advance(uint64_t by_us)
{
    const uint64_t until_us = now_us + by_us;
    for (;;) {
        const uint64_t next_us = device_next_us(&device);
        if (next_us > until_us) break;
        now_us = next_us > now_us ? next_us : now_us;
        device_step(&device, now_us);
        if (device_next_us(&device) <= now_us && device.state == DEVICE_SAFE) break;
    }
    now_us = until_us;
    device_step(&device, now_us);
}

static void put(uint8_t type, const void *message, uint32_t of_session, uint16_t with_sequence)
{
    struct frame frame = {.type = type, .session = of_session, .sequence = with_sequence};
    uint8_t octets[FRAME_WIRE_MAX];
    assert_true(message_encode(&frame, message));
    const size_t size = frame_encode(&frame, octets);
    device_octets(&device, now_us, octets, size);
}

/* Asks and gives the refusal's reason; REASON_NONE: done. */
static unsigned ask(uint8_t type, const void *message)
{
    const unsigned before = answers;
    union message_any said;
    put(type, message, session, sequence++);
    if (answers == before) return 999; /* no answer */
    assert_true(message_decode(&answer, &said));
    return answer.type == MESSAGE_REFUSAL ? said.refusal.reason : REASON_NONE;
}

static void hello(void)
{
    const struct message_hello message = {.nonce = ++nonce_hello};
    union message_any said;
    put(MESSAGE_HELLO, &message, 0, 0);
    assert_int_equal(answer.type, MESSAGE_IDENTITY);
    assert_true(message_decode(&answer, &said));
    session = said.identity.session;
    sequence = 1;
}

static unsigned limits(void)
{
    struct message_limits message = {.count = 1};
    (void)image_limits_encode(&image.limits[0], 1, message.limits);
    return ask(MESSAGE_LIMITS, &message);
}

static unsigned arm(void)
{
    struct message_arm message = {.n = image.n, .first = 1};
    union message_any said;
    size_t at = 0;
    (void)image_header_encode(&image.header, message.header);
    memcpy(message.h0, image.h0, sizeof message.h0);
    const unsigned reason = ask(MESSAGE_ARM, &message);
    if (reason == REASON_NONE && message_decode(&answer, &said))
        arm_nonce = octets_take(said.done.detail, &at, 8);
    return reason;
}

static unsigned confirm(void)
{
    struct message_confirm message = {.nonce = arm_nonce};
    memcpy(message.root, image.root, sizeof message.root);
    return ask(MESSAGE_CONFIRM, &message);
}

static unsigned send_segment(unsigned index)
{
    struct message_segment message;
    (void)image_segment_encode(&segments[index - 1], message.segment);
    memcpy(message.link, segments[index - 1].link, sizeof message.link);
    return ask(MESSAGE_SEGMENT, &message);
}

static unsigned start_in(uint64_t lead_us)
{
    const struct message_start message = {.nonce = arm_nonce, .at_us = now_us + lead_us};
    return ask(MESSAGE_START, &message);
}

static unsigned renew(uint64_t echo_us)
{
    const struct message_renew message = {.echo_us = echo_us};
    return ask(MESSAGE_RENEW, &message);
}

/* The clock that the last done carried. */
static uint64_t last_clock(void)
{
    union message_any said;
    assert_true(message_decode(&answer, &said));
    return answer.type == MESSAGE_DONE ? said.done.now_us : 0;
}

/* Time passes with the lease kept. */
static void advance_renewing(uint64_t by_us)
{
    uint64_t echo_us = last_clock();
    for (uint64_t done = 0; done < by_us && device.state >= DEVICE_ARMED; done += 50000) {
        advance(50000);
        if (device.state < DEVICE_ARMED) return;
        assert_int_equal(renew(echo_us), REASON_NONE);
        echo_us = last_clock();
    }
}

/* Three segments of 10 pulses at 20 pps on channel 1, invented. */
static void begin(void)
{
    memset(&board, 0, sizeof board);
    memset(&reader, 0, sizeof reader);
    answers = faults = 0;
    now_us = 4294967296u - 5000000u;
    build = (struct device_build){.identity = {.unit = "TEST",
                                               .channels = 2,
                                               .current_to_ua = 100000,
                                               .current_step_ua = 500,
                                               .duration_from_us = 20,
                                               .duration_to_us = 1000,
                                               .duration_step_us = 5,
                                               .interphase_us = 100,
                                               .independent = 1},
                                  .queue_segments = 8,
                                  .force_sensor = true,
                                  .own_limits = dose_program_limits()};
    platform = (struct platform){.pulse = give,
                                 .measured = measured,
                                 .force = force,
                                 .interlock = interlock,
                                 .fresh64 = fresh64,
                                 .send = hear,
                                 .silence = silence,
                                 .watchdog = feed};
    board.sensor = true;
    memset(&image, 0, sizeof image);
    memset(segments, 0, sizeof segments);
    image.header = (struct image_header){.format = 1,
                                         .kind = IMAGE_TIMED,
                                         .signoff = SIGNOFF_CLINICAL,
                                         .channels = 1,
                                         .channel = {1},
                                         .person_digest = 5,
                                         .pulses = 30};
    image.limits[0] = dose_program_limits();
    image.limits[0].load_ohm = 1000;
    image.limits[0].mismatch_ppm = 10000;
    image.limits[0].interphase_us = 100;
    image.limits[0].current_ua = 60000;
    image.identity = build.identity;
    image.segments = segments;
    image.n = SEGMENTS + 1;
    for (unsigned i = 0; i < SEGMENTS; i++) {
        segments[i].clock = SEGMENT_TIMED;
        segments[i].segment = (struct segment){.start_us = 1000000u * i,
                                               .period_us = 50000,
                                               .current_from_ua = 40000,
                                               .current_to_ua = 40000,
                                               .count = 10,
                                               .opening_gap_us = 5000,
                                               .duration_from_us = 300,
                                               .duration_to_us = 300,
                                               .channel = 1,
                                               .opening = 1};
    }
    segments[SEGMENTS].clock = SEGMENT_END;
    segments[SEGMENTS].segment.start_us = 3000000;
    image_seal(&image);
    device_init(&device, &build, &platform, now_us);
    advance(DEVICE_SETTLE_US);
    hello();
}

static void until_armed(void)
{
    begin();
    assert_int_equal(limits(), REASON_NONE);
    assert_int_equal(arm(), REASON_NONE);
    assert_int_equal(confirm(), REASON_NONE);
}

static void until_running(void)
{
    until_armed();
    for (unsigned i = 1; i <= SEGMENTS + 1; i++) assert_int_equal(send_segment(i), REASON_NONE);
    assert_int_equal(start_in(100000), REASON_NONE);
    assert_int_equal(device.state, DEVICE_RUNNING);
}

static void zero_from_here_on(enum device_cause cause)
{
    const unsigned before = board.pulses;
    assert_int_equal(device.state, DEVICE_SAFE);
    assert_int_equal(device.cause, cause);
    advance(5000000);
    assert_int_equal(board.pulses, before);
    assert_int_equal(device.state, DEVICE_SAFE); /* nothing resumes by itself */
}

#endif
