/* A host and a twin in one process on a simulated clock, over a link in memory: for accelerated tests. The
 * clock starts 5 s before 2^32 us. */
#ifndef PULSEWRIGHT_TESTS_BRIDGE_SIMULATION_H
#define PULSEWRIGHT_TESTS_BRIDGE_SIMULATION_H
#include "bridge/gate/gate.h"
#include "bridge/host/host.h"
#include "bridge/link/link.h"
#include "bridge/twin/twin.h"
#include "bridge/wire/image.h"
#include "support/near.h"

#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <unistd.h>

enum { SIMULATION_SEGMENTS = 64, SIMULATION_STEP_US = 250 };

struct simulation {
    struct stimulator stimulator;
    struct image image;
    struct image_segment segment[SIMULATION_SEGMENTS];
    struct link *host_end, *device_end;
    struct twin *twin;
    struct host *host;
    uint64_t now_us;
    char log[64], faults[64];
    bool host_frozen; /* the host does nothing from now on */
    unsigned forces;
    double force_greatest_n;
};

static inline void simulation_event(void *context, const struct host_event *event)
{
    struct simulation *s = context;
    if (event->kind != HOST_EVENT_FORCE) return;
    s->forces++;
    if (event->force_n > s->force_greatest_n) s->force_greatest_n = event->force_n;
}

/* Invented limits and an invented train: `trains` of `count` pulses at 30 pps on channel 1, 300 us, 40 mA. */
static inline void simulation_make_image(struct simulation *s, unsigned trains, unsigned count)
{
    const struct train_grid grid = {
        .current_from_ua = 0, .current_step_ua = 500, .duration_from_us = 20, .duration_step_us = 5};
    const char *source[DOSE_FIGURES];
    s->stimulator = (struct stimulator){.name = "bench",
                                        .unit = "TWIN",
                                        .channels = 2,
                                        .current_ma = {0, 140, 0.5},
                                        .duration_us = {20, 1000, 5},
                                        .frequency_pps = {1, 120, 1},
                                        .gap_us_min = 2000,
                                        .recovery_us = (double)NAN,
                                        .interphase_us = 100,
                                        .mismatch_percent = 1,
                                        .independent = true,
                                        .queue_segments = 32,
                                        .compliance_v = 200,
                                        .load_ohm = 1000,
                                        .baud = 115200};
    const struct dose_device device = stimulator_dose_device(&s->stimulator);
    memset(&s->image, 0, sizeof s->image);
    limits_effective(&device, NULL, &s->image.limits[0], source);
    s->image.header = (struct image_header){.format = 1,
                                            .kind = IMAGE_TIMED,
                                            .signoff = SIGNOFF_REHEARSAL,
                                            .channels = 1,
                                            .channel = {1},
                                            .person_digest = 7};
    s->image.identity = image_identity_of(&s->stimulator);
    s->image.segments = s->segment;
    memset(s->segment, 0, sizeof s->segment);
    uint64_t start_us = 0;
    for (unsigned i = 0; i < trains; i++) {
        s->segment[i].clock = SEGMENT_TIMED;
        s->segment[i].segment = (struct segment){.start_us = start_us,
                                                 .period_us = 33334,
                                                 .current_from_ua = 40000,
                                                 .current_to_ua = 40000,
                                                 .count = (uint16_t)count,
                                                 .opening_gap_us = 5000,
                                                 .duration_from_us = 300,
                                                 .duration_to_us = 300,
                                                 .channel = 1,
                                                 .opening = (uint8_t)(1 + i % 2)};
        start_us = segment_next_start(&s->segment[i].segment) + 400000;
        struct segment_cursor cursor;
        struct pulse pulse;
        segment_begin(&cursor, &s->segment[i].segment, &grid);
        while (segment_next(&cursor, &pulse)) s->image.header.pulses++;
    }
    s->segment[trains].clock = SEGMENT_END;
    s->segment[trains].segment.start_us = start_us;
    s->image.n = trains + 1;
    image_seal(&s->image);
}

static inline void simulation_begin(struct simulation *s, const char *faults_csv,
                                    const struct profile *profile)
{
    struct message why = {""};
    (void)snprintf(s->log, sizeof s->log, "simulation-%ld.log", (long)getpid());
    (void)snprintf(s->faults, sizeof s->faults, "simulation-%ld.faults", (long)getpid());
    if (faults_csv) {
        FILE *out = fopen(s->faults, "w");
        assert_non_null(out);
        fputs(faults_csv, out);
        fclose(out);
    }
    s->now_us = 4294967296u - 5000000u;
    s->host_frozen = false;
    assert_status(link_memory_pair(&s->host_end, &s->device_end, &why), STATUS_OK, &why);
    const struct twin_options options = {.stimulator = &s->stimulator,
                                         .profile = profile,
                                         .log_path = s->log,
                                         .faults_path = faults_csv ? s->faults : NULL,
                                         .seed = 11};
    assert_status(twin_new(&options, s->device_end, s->now_us, &s->twin, &why), STATUS_OK, &why);
    const struct host_options host = {
        .image = &s->image, .first = 1, .baud = 115200, .nonce = 99, .event = simulation_event, .context = s};
    assert_status(host_new(&host, s->host_end, s->now_us, &s->host, &why), STATUS_OK, &why);
}

/* Runs both until `until_us` or the host is over. */
static inline void simulation_run(struct simulation *s, uint64_t until_us)
{
    while (s->now_us < until_us && !(host_is_over(s->host) && !s->host_frozen)) {
        s->now_us += SIMULATION_STEP_US;
        twin_step(s->twin, s->now_us);
        if (s->host_frozen) continue;
        if (host_phase(s->host) == HOST_READY) host_arm(s->host);
        if (host_phase(s->host) == HOST_ARMED) host_start(s->host);
        host_step(s->host, s->now_us, true);
    }
}

/* Runs until the host is running. */
static inline void simulation_until_running(struct simulation *s)
{
    const uint64_t limit_us = s->now_us + 20000000;
    while (s->now_us < limit_us && host_phase(s->host) != HOST_RUNNING && !host_is_over(s->host))
        simulation_run(s, s->now_us + SIMULATION_STEP_US);
    if (host_phase(s->host) != HOST_RUNNING) print_error("ended: %s\n", host_end_text(s->host));
    assert_int_equal(host_phase(s->host), HOST_RUNNING);
}

static inline void simulation_end(struct simulation *s)
{
    host_free(s->host);
    twin_free(s->twin);
    link_close(s->host_end);
    link_close(s->device_end);
    (void)unlink(s->log);
    (void)unlink(s->faults);
}

/* Reads the twin's log: number of pulses; the first and last times. With `planned` every one is compared with
 * the image's expansion. */
static inline unsigned simulation_delivered(const struct simulation *s, bool planned, uint64_t *first_us,
                                            uint64_t *last_us)
{
    char line[128];
    unsigned count = 0, piece = 0;
    FILE *in = fopen(s->log, "r");
    assert_non_null(in);
    assert_non_null(fgets(line, sizeof line, in)); /* the header */
    struct segment_cursor cursor;
    struct pulse pulse;
    const struct train_grid grid = {
        .current_from_ua = 0, .current_step_ua = 500, .duration_from_us = 20, .duration_step_us = 5};
    segment_begin(&cursor, &s->image.segments[0].segment, &grid);
    while (fgets(line, sizeof line, in)) {
        unsigned long long at_us;
        unsigned channel, duration_us;
        unsigned long current_ua;
        assert_int_equal(sscanf(line, "%llu,%u,%u,%lu", &at_us, &channel, &duration_us, &current_ua), 4);
        if (count++ == 0) *first_us = at_us;
        *last_us = at_us;
        if (!planned) continue;
        while (!segment_next(&cursor, &pulse))
            segment_begin(&cursor, &s->image.segments[++piece].segment, &grid);
        assert_true(at_us - *first_us == pulse.at_us - s->image.segments[0].segment.start_us);
        assert_int_equal(channel, pulse.channel);
        assert_int_equal(duration_us, pulse.duration_us);
        assert_int_equal(current_ua, pulse.current_ua);
    }
    fclose(in);
    return count;
}

#endif
