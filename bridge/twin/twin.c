/* The twin: the device's own code around a virtual muscle. The goal of this code: what is rehearsed runs the
 * same wire, limits, lease and pulse clock as a board would. The hardware timer is modelled: due events run
 * in order, at their own time; octets move at the baud. */
#include "bridge/twin/twin.h"

#include "bridge/gate/gate.h"
#include "bridge/stimulator/device.h"
#include "bridge/twin/faults.h"
#include "bridge/twin/muscle.h"
#include <errno.h>
#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

enum { OUT_OCTETS = 8192, FRAME_HELD_MAX = 300, EVENTS_PER_STEP_MAX = 100000 };

struct twin {
    struct device device;
    struct device_build build;
    struct platform platform;
    struct link *wire;
    struct twin_muscle *muscle[STIMULATOR_CHANNELS_MAX]; /* distinct ones */
    unsigned muscles, muscle_of[IMAGE_CHANNELS_MAX + 1];
    bool drives[IMAGE_CHANNELS_MAX + 1];
    FILE *log;
    bool log_failed;
    uint64_t fresh;
    uint32_t last_ua[IMAGE_CHANNELS_MAX + 1];
    /* line */
    unsigned baud;
    uint64_t begin_us, in_us, out_us; /* up to when the line's capacity is used */
    uint8_t out[OUT_OCTETS];
    size_t out_count;
    /* faults */
    struct fault_schedule faults;
    bool cut, interlock_open;
    uint64_t stalled_until_us;
    uint8_t frame[FRAME_HELD_MAX]; /* the frame that is arriving, while faults are planned */
    size_t frame_size;
    struct {
        uint8_t octets[FRAME_HELD_MAX];
        size_t size;
        uint64_t at_us;
    } delayed;
};

static bool give_pulse(void *context, uint64_t now_us, uint8_t channel, uint32_t current_ua,
                       uint16_t duration_us, uint16_t interphase_us)
{
    struct twin *twin = context;
    (void)interphase_us;
    twin->last_ua[channel] = current_ua;
    if (twin->log) {
        (void)fprintf(twin->log, "%llu,%u,%u,%lu\n", (unsigned long long)now_us, channel, duration_us,
                      (unsigned long)current_ua);
        if (fflush(twin->log) != 0) twin->log_failed = true;
    }
    if (twin->drives[channel])
        twin_muscle_pulse(twin->muscle[twin->muscle_of[channel]], now_us, duration_us,
                          (double)current_ua / 1e3);
    return !twin->log_failed; /* a log that can not be written ends the output: nothing unseen is given */
}

static bool measured(void *context, uint8_t channel, uint32_t *current_ua)
{
    const struct twin *twin = context;
    *current_ua = twin->last_ua[channel];
    return true;
}

static bool force(void *context, uint64_t now_us, int32_t *force_mn)
{
    struct twin *twin = context;
    double force_n = 0;
    for (unsigned i = 0; i < twin->muscles; i++) force_n += twin_muscle_force_n(twin->muscle[i], now_us);
    *force_mn = (int32_t)lround(fmin(force_n, 2e6) * 1e3);
    return twin->muscles > 0;
}

static bool interlock(void *context)
{
    return !((const struct twin *)context)->interlock_open;
}

/* SplitMix64 (Steele, Lea and Flood 2014) from the given seed: a twin's nonces need to be new, not secret. */
static uint64_t fresh64(void *context)
{
    struct twin *twin = context;
    uint64_t z = twin->fresh += 0x9E3779B97F4A7C15u;
    z = (z ^ z >> 30) * 0xBF58476D1CE4E5B9u;
    z = (z ^ z >> 27) * 0x94D049BB133111EBu;
    return z ^ z >> 31;
}

static void queue_out(struct twin *twin, const uint8_t *octets, size_t size)
{
    if (twin->out_count + size > sizeof twin->out) return; /* the host asks again */
    memcpy(twin->out + twin->out_count, octets, size);
    twin->out_count += size;
}

static void send(void *context, const uint8_t *octets, size_t size)
{
    struct twin *twin = context;
    uint8_t copy[FRAME_WIRE_MAX];
    struct fault_entry *fault = fault_due(&twin->faults, twin->device.now_us - twin->begin_us, true,
                                          1u << FAULT_DROP | 1u << FAULT_CORRUPT | 1u << FAULT_DUPLICATE);
    memcpy(copy, octets, size);
    if (fault) {
        fault->done = true;
        if (fault->action == FAULT_DROP) return;
        if (fault->action == FAULT_CORRUPT) copy[size / 2] ^= 0x55;
        if (fault->action == FAULT_DUPLICATE) queue_out(twin, copy, size);
    }
    queue_out(twin, copy, size);
}

static void silence(void *context)
{
    (void)context; /* the twin gives whole pulses: nothing is under way between them */
}

static void watchdog(void *context)
{
    (void)context;
}

/* The built-in bench stimulator: invented. */
static struct stimulator built_in(void)
{
    struct stimulator stimulator = {.name = "twin",
                                    .unit = "TWIN",
                                    .channels = 8,
                                    .current_ma = {0, 140, 0.5},
                                    .duration_us = {20, 1000, 5},
                                    .frequency_pps = {1, 120, 1},
                                    .gap_us_min = 2000,
                                    .recovery_us = (double)NAN,
                                    .interphase_us = 100,
                                    .mismatch_percent = 1,
                                    .independent = true,
                                    .queue_segments = DEVICE_QUEUE_MAX,
                                    .compliance_v = 200,
                                    .load_ohm = 1000,
                                    .baud = 115200};
    return stimulator;
}

/* A muscle for each name that the hookup (or the one name) asks for. */
static enum status hook_muscles(struct twin *twin, const struct twin_options *options, struct message *why)
{
    const char *name[STIMULATOR_CHANNELS_MAX] = {0};
    const unsigned channels =
        options->hookup ? (unsigned)options->hookup->channels : twin->build.identity.channels;
    for (unsigned i = 0; i < channels; i++) {
        const unsigned channel = options->hookup ? options->hookup->channel[i].channel : i + 1;
        const struct profile_muscle *muscle = profile_muscle(
            options->profile, options->hookup ? options->hookup->channel[i].muscle : options->muscle, why);
        if (!muscle) return STATUS_DOCUMENT;
        if (channel > IMAGE_CHANNELS_MAX)
            return status_fail(why, STATUS_DOCUMENT, "channel %u is beyond %d", channel, IMAGE_CHANNELS_MAX);
        unsigned which = 0;
        while (which < twin->muscles && strcmp(name[which], muscle->name) != 0) which++;
        if (which == twin->muscles) {
            const enum status status = profile_muscle_usable(muscle, why);
            if (status != STATUS_OK) return status;
            twin->muscle[which] = twin_muscle_new(&muscle->parameters, why);
            if (!twin->muscle[which]) return STATUS_DOCUMENT;
            name[which] = muscle->name;
            twin->muscles++;
        }
        twin->muscle_of[channel] = which;
        twin->drives[channel] = true;
    }
    return STATUS_OK;
}

static enum status open_log(struct twin *twin, const char *path, struct message *why)
{
    if (!path) return STATUS_OK;
    twin->log = fopen(path, "we");
    if (!twin->log || fprintf(twin->log, "time_us,channel,duration_us,current_ua\n") < 0 ||
        fflush(twin->log) != 0)
        return status_fail(why, STATUS_USAGE, "%s: can not be written: %s", path, strerror(errno));
    return STATUS_OK;
}

enum status twin_new(const struct twin_options *options, struct link *wire, uint64_t now_us,
                     struct twin **made, struct message *why)
{
    const struct stimulator bench = built_in();
    const struct stimulator *stimulator = options->stimulator ? options->stimulator : &bench;
    struct twin *twin = calloc(1, sizeof *twin);
    if (!twin) return status_fail(why, STATUS_INTERNAL, "no memory for a twin");
    const char *source[DOSE_FIGURES];
    const struct dose_device dose_device = stimulator_dose_device(stimulator);
    twin->wire = wire;
    twin->baud = stimulator->baud;
    twin->fresh = options->seed;
    twin->begin_us = twin->in_us = twin->out_us = now_us;
    twin->build =
        (struct device_build){.identity = image_identity_of(stimulator),
                              .version = 1,
                              .queue_segments = (uint16_t)(stimulator->queue_segments < DEVICE_QUEUE_MAX
                                                               ? stimulator->queue_segments
                                                               : DEVICE_QUEUE_MAX),
                              .twin = true,
#ifdef PULSEWRIGHT_TEST_BUILD
                              .takes_both = true,
#endif
                              .force_sensor = options->profile != NULL};
    limits_effective(&dose_device, NULL, &twin->build.own_limits, source);
    twin->build.own_limits.slew_memory_ms =
        dose_program_limits().slew_memory_ms; /* a person's, not a device's */
    twin->platform = (struct platform){.context = twin,
                                       .pulse = give_pulse,
                                       .measured = measured,
                                       .force = force,
                                       .interlock = interlock,
                                       .fresh64 = fresh64,
                                       .send = send,
                                       .silence = silence,
                                       .watchdog = watchdog};
    enum status status = options->profile ? hook_muscles(twin, options, why) : STATUS_OK;
    if (status == STATUS_OK) status = open_log(twin, options->log_path, why);
    if (status == STATUS_OK && options->faults_path)
        status = fault_schedule_load(options->faults_path, &twin->faults, why);
    if (status != STATUS_OK) {
        twin_free(twin);
        return status;
    }
    device_init(&twin->device, &twin->build, &twin->platform, now_us);
    *made = twin;
    return STATUS_OK;
}

void twin_free(struct twin *twin)
{
    if (!twin) return;
    for (unsigned i = 0; i < twin->muscles; i++) twin_muscle_free(twin->muscle[i]);
    if (twin->log) (void)fclose(twin->log);
    fault_schedule_free(&twin->faults);
    free(twin);
}

/* Octets that the line can have moved since `used_us`; moves it on. */
static size_t line_octets(const struct twin *twin, uint64_t *used_us, uint64_t now_us, size_t wanted)
{
    const uint64_t octet_us = 10000000 / twin->baud + 1;
    if (now_us > *used_us + 5000)
        *used_us = now_us - 5000; /* an idle line saves nothing up but a small buffer */
    size_t octets = (size_t)((now_us - *used_us) / octet_us);
    if (octets > wanted) octets = wanted;
    *used_us += octets * octet_us;
    return octets;
}

static void hand_frame(struct twin *twin, uint64_t now_us)
{
    struct fault_entry *fault =
        fault_due(&twin->faults, now_us - twin->begin_us, false,
                  1u << FAULT_DROP | 1u << FAULT_CORRUPT | 1u << FAULT_DUPLICATE | 1u << FAULT_DELAY);
    const bool empty = twin->frame_size <= 1;
    if (fault && !empty) {
        fault->done = true;
        if (fault->action == FAULT_CORRUPT) twin->frame[twin->frame_size / 2] ^= 0x55;
        if (fault->action == FAULT_DUPLICATE)
            device_octets(&twin->device, now_us, twin->frame, twin->frame_size);
        if (fault->action == FAULT_DELAY) {
            memcpy(twin->delayed.octets, twin->frame, twin->frame_size);
            twin->delayed.size = twin->frame_size;
            twin->delayed.at_us = now_us + (uint64_t)(fault->argument * 1e3);
        }
        if (fault->action == FAULT_DROP || fault->action == FAULT_DELAY) twin->frame_size = 0;
    }
    device_octets(&twin->device, now_us, twin->frame, twin->frame_size);
    twin->frame_size = 0;
}

/* Reads at the line's speed; where faults are planned, frame by frame. */
static void take_in(struct twin *twin, uint64_t now_us)
{
    uint8_t octets[512];
    uint64_t used_us = twin->in_us;
    const size_t room = line_octets(twin, &used_us, now_us, sizeof octets);
    const long got = room ? link_read(twin->wire, octets, room) : 0;
    if (got <= 0) return;
    twin->in_us = now_us > twin->in_us + 5000 ? now_us - 5000 : twin->in_us;
    twin->in_us += (uint64_t)got * (10000000 / twin->baud + 1);
    if (twin->cut) return;
    if (twin->faults.entries == 0) {
        device_octets(&twin->device, now_us, octets, (size_t)got);
        return;
    }
    for (long i = 0; i < got; i++) {
        if (twin->frame_size < sizeof twin->frame) twin->frame[twin->frame_size++] = octets[i];
        if (octets[i] == 0) hand_frame(twin, now_us);
    }
}

static void give_out(struct twin *twin, uint64_t now_us)
{
    if (twin->cut) twin->out_count = 0;
    const size_t octets = line_octets(twin, &twin->out_us, now_us, twin->out_count);
    if (octets == 0) return;
    (void)link_write(twin->wire, twin->out, octets); /* nobody there: lost, as on a line */
    twin->out_count -= octets;
    memmove(twin->out, twin->out + octets, twin->out_count);
}

static void apply_faults(struct twin *twin, uint64_t now_us)
{
    const uint64_t since_us = now_us - twin->begin_us;
    for (int direction = 0; direction < 2; direction++) {
        struct fault_entry *fault;
        while ((fault = fault_due(&twin->faults, since_us, direction == 1,
                                  1u << FAULT_CUT | 1u << FAULT_STALL | 1u << FAULT_RESET |
                                      1u << FAULT_INTERLOCK))) {
            fault->done = true;
            if (fault->action == FAULT_CUT) twin->cut = true;
            if (fault->action == FAULT_STALL)
                twin->stalled_until_us = now_us + (uint64_t)(fault->argument * 1e3);
            if (fault->action == FAULT_RESET)
                device_init(&twin->device, &twin->build, &twin->platform, now_us);
            if (fault->action == FAULT_INTERLOCK) twin->interlock_open = true;
        }
    }
    if (twin->delayed.size && now_us >= twin->delayed.at_us) {
        device_octets(&twin->device, now_us, twin->delayed.octets, twin->delayed.size);
        twin->delayed.size = 0;
    }
}

void twin_step(struct twin *twin, uint64_t now_us)
{
    /* the hardware timer: what came due runs at its own time, in order, before newer octets are looked at */
    for (int events = 0; events < EVENTS_PER_STEP_MAX; events++) {
        const uint64_t due_us = device_next_us(&twin->device);
        if (due_us > now_us) break;
        device_step(&twin->device, due_us);
    }
    device_step(&twin->device, now_us);
    if (twin->faults.entries) apply_faults(twin, now_us);
    if (now_us < twin->stalled_until_us) return;
    take_in(twin, now_us);
    give_out(twin, now_us);
}

uint64_t twin_next_us(const struct twin *twin)
{
    const uint64_t due_us = device_next_us(&twin->device), soon_us = twin->device.now_us + 500;
    return twin->out_count && due_us > soon_us ? soon_us : due_us;
}

bool twin_is_silent(const struct twin *twin)
{
    return twin->device.state != DEVICE_RUNNING;
}
