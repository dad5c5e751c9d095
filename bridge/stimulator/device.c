/* The device: time and faults. The goal of this code: no pulse outside `running`, none late, none beyond a
 * limit, none after the lease; the first cause is latched and told; nothing resumes by itself. Freestanding.
 */
#include "bridge/stimulator/device.h"

#include "bridge/wire/octets.h"
#include <string.h>

void device_init(struct device *device, const struct device_build *build, const struct platform *platform,
                 uint64_t now_us)
{
    memset(device, 0, sizeof *device);
    device->build = build;
    device->platform = platform;
    device->boot = platform->fresh64(platform->context);
    device->boot_us = device->now_us = now_us;
    for (unsigned i = 0; i < IMAGE_CHANNELS_MAX; i++) dose_init(&device->channel[i].dose);
    platform->silence(platform->context);
}

bool device_send(struct device *device, uint8_t type, uint16_t sequence, const void *message)
{
    struct frame frame = {.type = type, .session = device->session, .sequence = sequence};
    uint8_t octets[FRAME_WIRE_MAX];
    if (!message_encode(&frame, message)) return false;
    device->platform->send(device->platform->context, octets, frame_encode(&frame, octets));
    return true;
}

/* Outputs zero; nonce, queue, limits void; the first cause stays until it is cleared. */
void device_make_safe(struct device *device, enum device_cause cause)
{
    device->platform->silence(device->platform->context);
    device->state = DEVICE_SAFE;
    if (device->cause == CAUSE_NONE) device->cause = cause;
    device->arm_nonce = 0;
    device->queue_head = device->queue_count = 0;
    device->end_held = false;
    device->limits_stated = device->limits_count = 0;
    for (unsigned i = 0; i < IMAGE_CHANNELS_MAX; i++) {
        device->channel[i].limited = false;
        device->channel[i].used = false;
        device->channel[i].active = false;
    }
}

void device_fault(struct device *device, enum device_cause cause, uint8_t channel,
                  const struct dose_verdict *verdict)
{
    struct message_fault fault = {.cause = (uint16_t)cause,
                                  .at_us = device->now_us,
                                  .channel = channel,
                                  .last_pulse_us = device->last_pulse_us};
    if (verdict) {
        fault.figure = (uint8_t)verdict->figure;
        fault.value = verdict->value;
        fault.limit = verdict->limit;
    }
    device_make_safe(device, cause);
    (void)device_send(device, MESSAGE_FAULT, device->out_sequence++, &fault);
}

/* Eight damaged frames within a second are a fault where there is something to lose. */
static void count_damaged(struct device *device)
{
    if (device->reader.damaged == device->damaged_seen) return;
    device->damaged_seen = device->reader.damaged;
    device->damaged_us[device->damaged_at] = device->now_us + 1; /* 0: none */
    device->damaged_at = (uint8_t)((device->damaged_at + 1) % DEVICE_DAMAGED_MAX);
    const uint64_t oldest = device->damaged_us[device->damaged_at]; /* the eighth newest */
    if (oldest && device->now_us + 1 - oldest < 1000000 && device->state != DEVICE_SAFE)
        device_fault(device, CAUSE_DAMAGED, 0, NULL);
}

void device_octets(struct device *device, uint64_t now_us, const uint8_t *octets, size_t size)
{
    struct frame frame;
    if (now_us > device->now_us) device->now_us = now_us;
    for (size_t i = 0; i < size; i++) {
        if (frame_reader_take(&device->reader, octets[i], &frame)) device_take_request(device, &frame);
        count_damaged(device);
    }
}

/* One tally frame holds at most four channels. */
void device_send_tally(struct device *device, uint8_t only_channel)
{
    struct message_tally tally = {.at_us = device->now_us};
    for (uint8_t c = 1; c <= IMAGE_CHANNELS_MAX; c++) {
        const struct device_channel *channel = &device->channel[c - 1];
        if (!channel->used || (only_channel && c != only_channel)) continue;
        size_t at = 17u * tally.count++;
        at = octets_put(tally.counts, at, c, 1);
        at = octets_put(tally.counts, at, channel->pulses, 4);
        at = octets_put(tally.counts, at, channel->charge_pc, 8);
        (void)octets_put(tally.counts, at, channel->skipped, 4);
        if (tally.count < TALLY_CHANNELS) continue;
        (void)device_send(device, MESSAGE_TALLY, device->out_sequence++, &tally);
        tally.count = 0;
        memset(tally.counts, 0, sizeof tally.counts);
    }
    if (tally.count) (void)device_send(device, MESSAGE_TALLY, device->out_sequence++, &tally);
}

static uint64_t earlier(uint64_t a, uint64_t b)
{
    return a < b ? a : b;
}

static uint64_t next_pulse_us(const struct device *device)
{
    uint64_t next = UINT64_MAX;
    for (unsigned i = 0; i < IMAGE_CHANNELS_MAX; i++)
        if (device->channel[i].active) next = earlier(next, device->channel[i].next.at_us);
    if (device->queue_count) {
        /* a head whose channel is still under way waits for it */
        const struct segment *head = &device->queue[device->queue_head].segment;
        if (!device->channel[head->channel - 1].active) next = earlier(next, device->t0_us + head->start_us);
    } else if (device->end_held && next == UINT64_MAX) {
        next = device->t0_us + device->end_us;
    }
    return next;
}

uint64_t device_next_us(const struct device *device)
{
    uint64_t next = UINT64_MAX;
    if (device->state == DEVICE_ARMING) next = device->until_us;
    if (device->state == DEVICE_ARMED) next = earlier(device->until_us, device->lease_us);
    if (device->state == DEVICE_RUNNING) {
        next = earlier(device->lease_us, next_pulse_us(device));
        if (!device->end_held) next = earlier(next, device->t0_us + device->newest_start_us);
        next = earlier(next, device->tally_due_us);
    }
    if (device->state >= DEVICE_ARMED) next = earlier(next, device->force_due_us);
    return next < device->now_us ? device->now_us : next;
}

static void step_timeouts(struct device *device)
{
    if (device->state == DEVICE_ARMING && device->now_us >= device->until_us)
        device_fault(device, CAUSE_NOT_CONFIRMED, 0, NULL);
    if (device->state >= DEVICE_ARMED && device->now_us >= device->lease_us)
        device_fault(device, CAUSE_LEASE, 0, NULL);
    if (device->state == DEVICE_ARMED &&
        device->now_us >= device->until_us) { /* not begun: latches nothing */
        device_make_safe(device, CAUSE_NONE);
        const struct message_state state = {.state = DEVICE_SAFE, .now_us = device->now_us};
        (void)device_send(device, MESSAGE_STATE, device->out_sequence++, &state);
    }
    if (device->state >= DEVICE_ARMED && !device->platform->interlock(device->platform->context))
        device_fault(device, CAUSE_INTERLOCK, 0, NULL);
}

void device_step(struct device *device, uint64_t now_us)
{
    if (now_us > device->now_us) device->now_us = now_us;
    device->platform->watchdog(device->platform->context);
    step_timeouts(device);
    if (device->state >= DEVICE_ARMED) device_sense(device);
    if (device->state == DEVICE_RUNNING) device_run_pulses(device);
}
