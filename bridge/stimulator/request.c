/* The device: requests. The goal of this code: the state table, row by row; a request that is repeated is
 * answered again and not done twice (sequences as in RFC 1982); what is refused changes nothing.
 * Freestanding. */
#include "bridge/stimulator/device.h"

#include "bridge/wire/octets.h"
#include <string.h>

struct reply {
    struct message_done done;
    enum refusal_reason reason;
    uint32_t detail;
    bool silent; /* told already */
};

static void refuse(struct reply *reply, enum refusal_reason reason, uint32_t detail)
{
    reply->reason = reason;
    reply->detail = detail;
}

static void note_sent_clock(struct device *device, uint64_t us)
{
    device->sent_us[device->sent_at] = us;
    device->sent_at = (uint8_t)((device->sent_at + 1) % DEVICE_CLOCKS_SENT);
}

static void send_identity(struct device *device, uint16_t sequence)
{
    struct message_identity identity = {.nonce = device->nonce_hello,
                                        .session = device->session,
                                        .boot = device->boot,
                                        .twin = device->build->twin,
                                        .virtual_clock = device->build->virtual_clock,
                                        .version = device->build->version,
                                        .cause = (uint16_t)device->cause,
                                        .state = (uint8_t)device->state,
                                        .now_us = device->now_us,
                                        .queue_segments = device->build->queue_segments,
                                        .force_sensor = device->build->force_sensor};
    memcpy(identity.table, message_table_digest(), sizeof identity.table);
    (void)image_identity_encode(&device->build->identity, identity.identity);
    (void)device_send(device, MESSAGE_IDENTITY, sequence, &identity);
}

static void take_hello(struct device *device, uint16_t sequence, uint64_t nonce)
{
    if (device->greeted && nonce == device->nonce_hello) { /* answered again, nothing changes */
        send_identity(device, sequence);
        return;
    }
    if (device->state != DEVICE_SAFE) device_fault(device, CAUSE_SECOND_HOST, 0, NULL);
    device_make_safe(device, CAUSE_NONE);
    device->greeted = true;
    device->nonce_hello = nonce;
    device->session = (uint32_t)device->platform->fresh64(device->platform->context);
    device->any_sequence = false;
    for (unsigned i = 0; i < DEVICE_ANSWERS; i++) device->answer[i].known = false;
    memset(device->sent_us, 0, sizeof device->sent_us);
    send_identity(device, sequence);
}

static void take_clear(struct device *device, const struct message_clear *message, struct reply *reply)
{
    if (device->state != DEVICE_SAFE) return refuse(reply, REASON_STATE, device->state);
    if (message->cause != device->cause) return refuse(reply, REASON_CAUSE, device->cause);
    device->cause = CAUSE_NONE;
}

static void take_limits(struct device *device, const struct message_limits *message, struct reply *reply)
{
    struct dose_limits limits;
    uint8_t c = 0;
    if (device->state != DEVICE_SAFE) return refuse(reply, REASON_STATE, device->state);
    if (device->cause != CAUSE_NONE) return refuse(reply, REASON_CAUSE, device->cause);
    if (device->now_us - device->boot_us < DEVICE_SETTLE_US) return refuse(reply, REASON_RESET, 0);
    if (!image_limits_decode(message->limits, sizeof message->limits, &limits, &c) ||
        c > device->build->identity.channels)
        return refuse(reply, REASON_VALUE, c);
    if (device->limits_count && device->limits_count != message->count)
        return refuse(reply, REASON_VALUE, message->count);
    const struct dose_limits program = dose_program_limits();
    const struct dose_limits own = dose_stricter(&device->build->own_limits, &program);
    struct device_channel *channel = &device->channel[c - 1];
    channel->limits = dose_stricter(&limits, &own);
    device->limits_count = message->count;
    if (!channel->limited) device->limits_stated++;
    channel->limited = true;
    reply->done.size = (uint8_t)image_limits_encode(&channel->limits, c, reply->done.detail);
    if (device->limits_stated == device->limits_count) device->state = DEVICE_LIMITED;
}

/* Session totals are a person's: another person starts at what the gate sends; the same one at the greater of
 * both. */
static void take_totals(struct device *device, const struct image_header *header, const uint8_t *totals)
{
    const bool same = device->any_person && device->person_digest == header->person_digest;
    size_t at = 0;
    for (unsigned i = 0; i < header->channels; i++) {
        struct dose_channel *dose = &device->channel[header->channel[i] - 1].dose;
        uint64_t pulses = octets_take(totals, &at, 4), charge_pc = octets_take(totals, &at, 8);
        if (same && dose->session_pulses > pulses) pulses = dose->session_pulses;
        if (same && dose->session_charge_pc > charge_pc) charge_pc = dose->session_charge_pc;
        dose_session(dose, device->now_us, pulses, charge_pc);
    }
    device->any_person = true;
    device->person_digest = header->person_digest;
}

/* What is wrong with arming this image here; REASON_NONE: nothing. */
static enum refusal_reason arm_fault(const struct device *device, const struct message_arm *message,
                                     const struct image_header *header, uint32_t *detail)
{
    const bool rehearsal = header->signoff == SIGNOFF_REHEARSAL;
    *detail = header->kind;
    if (header->kind == IMAGE_ANGLE) return REASON_NOT_SUPPORTED;
    if (!device->build->takes_both && rehearsal != device->build->twin) return REASON_KIND;
    *detail = message->first;
    if (message->first < 1 || message->first > message->n) return REASON_VALUE;
    if (header->kind == IMAGE_HELD && header->channels != 1) return REASON_VALUE;
    for (unsigned i = 0; i < header->channels; i++) {
        *detail = header->channel[i];
        if (header->channel[i] > device->build->identity.channels) return REASON_VALUE;
        if (!device->channel[header->channel[i] - 1].limited) return REASON_LIMITS;
    }
    return REASON_NONE;
}

static void take_arm(struct device *device, const struct message_arm *message, struct reply *reply)
{
    struct image_header header;
    if (device->state != DEVICE_LIMITED) return refuse(reply, REASON_STATE, device->state);
    if (!image_header_decode(message->header, sizeof message->header, &header))
        return refuse(reply, REASON_VALUE, 0);
    reply->reason = arm_fault(device, message, &header, &reply->detail);
    if (reply->reason != REASON_NONE) return;
    device->header = header;
    device->n = message->n;
    device->first = message->first;
    device->next_index = 1;
    memcpy(device->h0, message->h0, sizeof device->h0);
    memcpy(device->link, message->h0, sizeof device->link);
    take_totals(device, &header, message->totals);
    device->arm_nonce = device->platform->fresh64(device->platform->context);
    device->until_us = device->now_us + DEVICE_ARMING_US_MAX;
    device->state = DEVICE_ARMING;
    reply->done.size = (uint8_t)octets_put(reply->done.detail, 0, device->arm_nonce, 8);
}

static void take_confirm(struct device *device, const struct message_confirm *message, struct reply *reply)
{
    struct dose_limits limits[IMAGE_CHANNELS_MAX];
    uint8_t root[IMAGE_ROOT_SIZE];
    if (device->state != DEVICE_ARMING) return refuse(reply, REASON_STATE, device->state);
    if (message->nonce != device->arm_nonce) return refuse(reply, REASON_NONCE, 0);
    for (unsigned i = 0; i < device->header.channels; i++)
        limits[i] = device->channel[device->header.channel[i] - 1].limits;
    image_root(&device->header, limits, &device->build->identity, device->n, device->h0, root);
    if (memcmp(root, message->root, sizeof root) != 0) return refuse(reply, REASON_ROOT, 0);
    for (unsigned i = 0; i < device->header.channels; i++) {
        struct device_channel *channel = &device->channel[device->header.channel[i] - 1];
        channel->used = true;
        channel->active = channel->eased = false;
        channel->ease = device->header.kind == IMAGE_HELD ? 0 : EASE_FULL;
        channel->measured_off = 0;
        channel->force_cap_mn = device->header.force_cap_mn[i];
    }
    device->queue_head = device->queue_count = 0;
    device->end_held = device->held = false;
    device->newest_start_us = 0;
    device->until_us = device->now_us + DEVICE_ARMED_US_MAX;
    device->lease_us = device->now_us + DEVICE_LEASE_US;
    device->force_due_us = device->force_seen_us = device->now_us;
    device->readings = 0;
    device->state = DEVICE_ARMED;
    note_sent_clock(device, device->now_us);
}

static void take_start(struct device *device, const struct message_start *message, struct reply *reply)
{
    if (device->state != DEVICE_ARMED) return refuse(reply, REASON_STATE, device->state);
    if (message->nonce != device->arm_nonce) return refuse(reply, REASON_NONCE, 0);
    if (device->queue_count == 0) return refuse(reply, REASON_NOT_HELD, device->next_index);
    if (message->at_us < device->now_us + DEVICE_START_US_LEAST ||
        message->at_us > device->now_us + DEVICE_START_US_MOST)
        return refuse(reply, REASON_TIME, 0);
    if (!device->platform->interlock(device->platform->context)) return refuse(reply, REASON_INTERLOCK, 0);
    /* the time of segment f: image time 0 lies its start before, maybe before this device's reset: sums are
     * modulo 2^64 */
    device->t0_us = message->at_us - device->queue[device->queue_head].segment.start_us;
    for (unsigned i = 0; i < IMAGE_CHANNELS_MAX; i++) {
        device->channel[i].pulses = device->channel[i].skipped = 0;
        device->channel[i].charge_pc = 0;
    }
    device->last_pulse_us = 0;
    memset(device->busy_until_us, 0, sizeof device->busy_until_us);
    device->tally_due_us = device->now_us + DEVICE_TALLY_EVERY_US;
    device->state = DEVICE_RUNNING;
}

static bool was_sent(const struct device *device, uint64_t echo_us)
{
    for (unsigned i = 0; i < DEVICE_CLOCKS_SENT; i++)
        if (echo_us != 0 && device->sent_us[i] == echo_us) return true;
    return false;
}

static void take_renew(struct device *device, const struct message_renew *message, struct reply *reply)
{
    if (device->state < DEVICE_ARMED) return refuse(reply, REASON_STATE, device->state);
    if (message->echo_us > device->now_us || !was_sent(device, message->echo_us)) {
        device_fault(device, CAUSE_ECHO, 0, NULL);
        reply->silent = true;
        return;
    }
    uint64_t until_us = message->echo_us + DEVICE_LEASE_US;
    if (until_us < device->lease_us) until_us = device->lease_us;
    if (until_us > device->now_us + DEVICE_LEASE_US) until_us = device->now_us + DEVICE_LEASE_US;
    device->lease_us = until_us;
    if (device->header.kind == IMAGE_HELD && device->held && !message->held) { /* released: two steps down */
        struct device_channel *channel = &device->channel[device->header.channel[0] - 1];
        const uint32_t steps = 2 * device->header.ease_step_thousandths;
        channel->ease = channel->ease > steps ? (uint16_t)(channel->ease - steps) : 0;
    }
    device->held = message->held != 0;
    if (device->held) device->held_us = device->now_us;
    note_sent_clock(device, device->now_us);
}

static void take_ease(struct device *device, const struct message_ease *message, struct reply *reply)
{
    if (device->state < DEVICE_ARMED) return refuse(reply, REASON_STATE, device->state);
    for (unsigned c = 1; c <= IMAGE_CHANNELS_MAX; c++) {
        struct device_channel *channel = &device->channel[c - 1];
        if (!channel->used || (message->channel != EASE_ALL && message->channel != c)) continue;
        /* in a held image strength rises only by a step a pulse given; an ease may lower it */
        if (device->header.kind == IMAGE_HELD && message->thousandths > channel->ease) continue;
        channel->ease = message->thousandths;
        if (channel->ease < EASE_FULL) channel->eased = true;
    }
}

static void take_segment(struct device *device, const struct message_segment *message, struct reply *reply)
{
    if (device->state < DEVICE_ARMED) return refuse(reply, REASON_STATE, device->state);
    reply->reason = device_take_segment(device, message, &reply->detail);
    reply->silent = device->state == DEVICE_SAFE; /* a fault was told instead */
}

static void take_report(struct device *device, struct reply *reply)
{
    size_t at = 0;
    _Static_assert(16 * IMAGE_CHANNELS_MAX + 8 <= MESSAGE_DETAIL_MAX, "a report fits its answer");
    for (unsigned i = 0; i < IMAGE_CHANNELS_MAX; i++) {
        at = octets_put(reply->done.detail, at, device->channel[i].pulses, 4);
        at = octets_put(reply->done.detail, at, device->channel[i].charge_pc, 8);
        at = octets_put(reply->done.detail, at, device->channel[i].skipped, 4);
    }
    at = octets_put(reply->done.detail, at, device->last_pulse_us, 8);
    reply->done.size = (uint8_t)at;
}

static void take(struct device *device, const struct frame *frame, const union message_any *message,
                 struct reply *reply)
{
    switch (frame->type) {
    case MESSAGE_CLEAR: take_clear(device, &message->clear, reply); break;
    case MESSAGE_LIMITS: take_limits(device, &message->limits, reply); break;
    case MESSAGE_ARM: take_arm(device, &message->arm, reply); break;
    case MESSAGE_CONFIRM: take_confirm(device, &message->confirm, reply); break;
    case MESSAGE_SEGMENT: take_segment(device, &message->segment, reply); break;
    case MESSAGE_START: take_start(device, &message->start, reply); break;
    case MESSAGE_RENEW: take_renew(device, &message->renew, reply); break;
    case MESSAGE_EASE: take_ease(device, &message->ease, reply); break;
    case MESSAGE_REPORT: take_report(device, reply); break;
    default: refuse(reply, REASON_NOT_SUPPORTED, frame->type); break;
    }
}

static void answer(struct device *device, const struct frame *frame, const struct reply *reply)
{
    struct frame out = {.session = device->session, .sequence = frame->sequence};
    uint8_t octets[FRAME_WIRE_MAX];
    const struct message_refusal refusal = {
        .what = frame->type, .reason = (uint16_t)reply->reason, .detail = reply->detail};
    if (reply->silent) return;
    out.type = reply->reason != REASON_NONE ? MESSAGE_REFUSAL : MESSAGE_DONE;
    if (!message_encode(&out,
                        reply->reason != REASON_NONE ? (const void *)&refusal : (const void *)&reply->done))
        return;
    device->platform->send(device->platform->context, octets, frame_encode(&out, octets));
    if (reply->reason == REASON_FULL || reply->reason == REASON_NEXT_IS)
        return; /* asked again, they may be done */
    device->answer[frame->sequence % DEVICE_ANSWERS].known = true;
    device->answer[frame->sequence % DEVICE_ANSWERS].answer = out;
}

/* A repeat is answered as before; one older than the answers kept is dropped. */
static bool is_repeat(struct device *device, const struct frame *frame)
{
    uint8_t octets[FRAME_WIRE_MAX];
    const unsigned slot = frame->sequence % DEVICE_ANSWERS;
    if (device->answer[slot].known && device->answer[slot].answer.sequence == frame->sequence) {
        device->platform->send(device->platform->context, octets,
                               frame_encode(&device->answer[slot].answer, octets));
        return true;
    }
    if (!device->any_sequence || sequence_after(frame->sequence, device->newest_sequence)) {
        device->any_sequence = true;
        device->newest_sequence = frame->sequence;
        return false;
    }
    return (uint16_t)(device->newest_sequence - frame->sequence) >= DEVICE_ANSWERS;
}

/* In every state, any number of times, of any session. */
static void take_stop(struct device *device, const struct frame *frame)
{
    const struct message_done done = {.what = frame->type, .now_us = device->now_us};
    if (device->state == DEVICE_RUNNING) device_send_tally(device, 0);
    device_make_safe(device, frame->type == MESSAGE_STOP ? CAUSE_STOP : CAUSE_DISARM);
    (void)device_send(device, MESSAGE_DONE, frame->sequence, &done);
}

void device_take_request(struct device *device, const struct frame *frame)
{
    union message_any message;
    if (!message_decode(frame, &message)) {
        device->reader.damaged++; /* a wrong length or value is as good as damage */
        return;
    }
    if (frame->type == MESSAGE_HELLO) return take_hello(device, frame->sequence, message.hello.nonce);
    if (frame->type == MESSAGE_STOP || frame->type == MESSAGE_DISARM) return take_stop(device, frame);
    if (!device->greeted || frame->session != device->session) return;
    if (frame->type == MESSAGE_CLOCK) { /* changes nothing: answered without being remembered */
        const struct message_clock_is is = {.host_us = message.clock.host_us, .device_us = device->now_us};
        note_sent_clock(device, device->now_us);
        (void)device_send(device, MESSAGE_CLOCK_IS, frame->sequence, &is);
        return;
    }
    if (is_repeat(device, frame)) return;
    struct reply reply = {.done = {.what = frame->type, .now_us = device->now_us}};
    take(device, frame, &message, &reply);
    answer(device, frame, &reply);
}
