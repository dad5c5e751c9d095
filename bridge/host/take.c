/* The host: what is heard. The goal of this code: what was delivered is told by the device itself, and an end
 * is never guessed. */
#include "bridge/host/state.h"

#include "bridge/wire/octets.h"
#include <stdio.h>
#include <string.h>

static void end_session(struct host *host)
{
    /* the device is safe: what did it deliver? */
    host->zero_known = true;
    host_forget_requests(host);
    host_enter(host, HOST_REPORTING);
    const struct message_report report = {0};
    host_ask(host, MESSAGE_REPORT, &report);
}

static bool identity_matches(struct host *host)
{
    uint8_t expected[IMAGE_IDENTITY_OCTETS];
    (void)image_identity_encode(&host->options.image->identity, expected);
    if (memcmp(host->identity.table, message_table_digest(), 8) != 0) {
        host_fail(host, "the device speaks another message table");
    } else if (memcmp(expected, host->identity.identity, sizeof expected) != 0) {
        host_fail(host,
                  "the device is not the one that was planned for: it says it is \"%.32s\", the plan is for "
                  "\"%.32s\" with its channels, ranges, steps and phases",
                  (const char *)host->identity.identity, host->options.image->identity.unit);
    } else if (host->options.image->header.signoff == SIGNOFF_REHEARSAL && !host->identity.twin) {
        host_fail(host, "a rehearsal plays on a twin only, and the device does not say it is one");
    } else {
        return true;
    }
    return false;
}

static void take_identity(struct host *host, const struct message_identity *identity)
{
    if (identity->nonce != host->options.nonce) return;
    host->identity = *identity;
    host->session = identity->session;
    if (host->over_asked) { /* asked why it is safe */
        if (identity->boot != host->boot) {
            host->zero_known = true;
            host_fail(host, "the device was reset while it was armed; its outputs are zero since");
            return;
        }
        if (identity->state != DEVICE_SAFE) return;
        host->cause = (enum device_cause)identity->cause;
        end_session(host);
        return;
    }
    if (host->identified) return;
    host->identified = true;
    host->boot = identity->boot;
    if (!identity_matches(host)) return;
    host->cause = CAUSE_NONE;
    host_enter(host, identity->cause ? HOST_CLEARING : HOST_SYNCING);
}

static void take_report(struct host *host, const struct message_done *done)
{
    size_t at = 0;
    if (done->size < 16 * IMAGE_CHANNELS_MAX) return;
    for (unsigned c = 1; c <= IMAGE_CHANNELS_MAX; c++) {
        host->totals[c].pulses = (uint32_t)octets_take(done->detail, &at, 4);
        host->totals[c].charge_pc = octets_take(done->detail, &at, 8);
        host->totals[c].skipped = (uint32_t)octets_take(done->detail, &at, 4);
    }
    host->totals_exact = true;
    uint64_t accounted = 0;
    for (unsigned c = 1; c <= IMAGE_CHANNELS_MAX; c++)
        accounted += host->totals[c].pulses + host->totals[c].skipped;
    if (host->cause == CAUSE_NONE && host->options.first == 1 &&
        accounted != host->options.image->header.pulses) {
        host_fail(host, "the device gave or skipped %llu of %llu pulses and names no cause; output is zero",
                  (unsigned long long)accounted, (unsigned long long)host->options.image->header.pulses);
    } else if (host->cause == CAUSE_NONE) {
        (void)snprintf(host->end_text, sizeof host->end_text, "every pulse was given or skipped as eased");
        host_enter(host, HOST_FINISHED);
    } else if (host->cause == CAUSE_STOP || host->cause == CAUSE_DISARM) {
        (void)snprintf(host->end_text, sizeof host->end_text, "stopped on request; output is zero");
        host_enter(host, HOST_STOPPED);
    } else {
        const double at_ms = host->fault_told && host->t0_device_us
                                 ? (double)(int64_t)(host->fault.at_us - host->t0_device_us) / 1e3
                                 : 0;
        if (host->fault_told)
            host_fail(host, "%s (%.0f ms after the start); output is zero", cause_text(host->cause), at_ms);
        else
            host_fail(host, "%s; output is zero", cause_text(host->cause));
    }
}

static void take_done(struct host *host, uint8_t what, const struct message_done *done)
{
    uint8_t expected[IMAGE_LIMITS_OCTETS];
    size_t at = 0;
    switch (what) {
    case MESSAGE_CLEAR: host_enter(host, HOST_SYNCING); break;
    case MESSAGE_LIMITS:
        (void)image_limits_encode(&host->options.image->limits[host->limits_done],
                                  host->options.image->header.channel[host->limits_done], expected);
        if (done->size != sizeof expected || memcmp(done->detail, expected, sizeof expected) != 0) {
            host_fail(
                host,
                "the device holds stricter limits on channel %u than were signed: plan again for this device",
                host->options.image->header.channel[host->limits_done]);
            return;
        }
        host->limits_done++;
        break;
    case MESSAGE_ARM: host->arm_nonce = done->size >= 8 ? octets_take(done->detail, &at, 8) : 0; break;
    case MESSAGE_CONFIRM:
        host->echo_us = done->now_us;
        host->renew_due_us = host->now_us;
        host_enter(host, HOST_ARMED);
        break;
    case MESSAGE_START: host_enter(host, HOST_RUNNING); break;
    case MESSAGE_RENEW: host->echo_us = done->now_us; break;
    case MESSAGE_STOP:
        if (host->phase == HOST_STOPPING) {
            host->cause = CAUSE_STOP;
            end_session(host);
        }
        break;
    case MESSAGE_REPORT: take_report(host, done); break;
    default: break;
    }
}

static void take_segment_done(struct host *host, const struct frame *asked)
{
    size_t at = 0;
    const uint32_t index = (uint32_t)octets_take(asked->payload, &at, 4);
    if (index >= host->acknowledged) host->acknowledged = index + 1;
}

static void go_back(struct host *host, uint32_t next)
{
    for (unsigned i = 0; i < IN_FLIGHT_MAX; i++)
        if (host->request[i].used && host->request[i].frame.type == MESSAGE_SEGMENT)
            host->request[i].used = false;
    host->next_segment = next;
}

static void take_refusal(struct host *host, struct request *request, const struct message_refusal *refusal)
{
    if (refusal->what == MESSAGE_RENEW || (host->phase == HOST_RUNNING && refusal->reason == REASON_STATE)) {
        if (host->over_asked || host->phase == HOST_STOPPING) return;
        host->over_asked = true; /* the device is safe and its word was lost: ask why */
        host_forget_requests(host);
        host_ask_hello(host);
        return;
    }
    if (!request) return;
    request->used = false;
    if (refusal->what == MESSAGE_SEGMENT && refusal->reason == REASON_NEXT_IS) {
        go_back(host, refusal->detail);
    } else if (refusal->what == MESSAGE_SEGMENT && refusal->reason == REASON_FULL) {
        go_back(host, host->acknowledged);
        host->clear_wait_us = host->now_us + 50000; /* it empties as pulses are given */
    } else if (refusal->what == MESSAGE_LIMITS && refusal->reason == REASON_RESET) {
        host->clear_wait_us = host->now_us + 100000;
    } else {
        host_fail(host, "%s was refused: %s (%u)", message_name(refusal->what), reason_text(refusal->reason),
                  refusal->detail);
    }
}

static void take_tally(struct host *host, const struct message_tally *tally)
{
    size_t at = 0;
    for (unsigned i = 0; i < tally->count; i++) {
        const unsigned channel = (unsigned)octets_take(tally->counts, &at, 1);
        struct host_totals totals;
        totals.pulses = (uint32_t)octets_take(tally->counts, &at, 4);
        totals.charge_pc = octets_take(tally->counts, &at, 8);
        totals.skipped = (uint32_t)octets_take(tally->counts, &at, 4);
        if (channel >= 1 && channel <= IMAGE_CHANNELS_MAX) host->totals[channel] = totals;
    }
    host_tell(host,
              (struct host_event){.kind = HOST_EVENT_TALLY, .at_us = tally->at_us - host->t0_device_us});
}

static void take_sample(struct host *host, const struct message_sample *sample)
{
    for (unsigned i = 0; i < SAMPLE_READINGS; i++) {
        size_t at = 12u * i;
        const uint64_t dt_us = octets_take(sample->readings, &at, 2) * 10;
        const int32_t force_mn = (int32_t)(uint32_t)octets_take(sample->readings, &at, 4);
        if (host->phase < HOST_RUNNING || (int64_t)(sample->time_us + dt_us - host->t0_device_us) < 0)
            continue;
        host_tell(host, (struct host_event){.kind = HOST_EVENT_FORCE,
                                            .at_us = sample->time_us + dt_us - host->t0_device_us,
                                            .force_n = force_mn / 1e3});
    }
}

static void take_unasked(struct host *host, uint8_t type, const union message_any *message)
{
    if (type == MESSAGE_TALLY) take_tally(host, &message->tally);
    if (type == MESSAGE_SAMPLE) take_sample(host, &message->sample);
    if (type == MESSAGE_DELIVERED)
        host_tell(host, (struct host_event){.kind = HOST_EVENT_DELIVERED,
                                            .at_us = message->delivered.at_us - host->t0_device_us,
                                            .channel = message->delivered.channel,
                                            .duration_us = message->delivered.duration_us,
                                            .set_ua = message->delivered.set_ua,
                                            .measured_ua = message->delivered.measured_ua});
    const bool active = host->phase >= HOST_ARMED && host->phase <= HOST_STOPPING;
    if (type == MESSAGE_FAULT && active) {
        host->fault = message->fault;
        host->fault_told = true;
        host->cause = (enum device_cause)message->fault.cause;
        end_session(host);
    }
    if (type == MESSAGE_STATE && active && message->state.state == DEVICE_SAFE) {
        if (host->phase == HOST_ARMED) {
            host->zero_known = true;
            host_fail(host, "it was armed for two minutes and not begun; arm again");
            return;
        }
        host->cause = (enum device_cause)message->state.cause;
        end_session(host);
    }
}

static void take_frame(struct host *host, const struct frame *frame)
{
    union message_any message;
    flight_keep(&host->flight, false, host->now_us, frame);
    if (!message_decode(frame, &message)) return;
    if (frame->type != MESSAGE_IDENTITY && frame->session != host->session) return;
    struct request *request = host_request_of(host, frame->sequence);
    const bool answer = frame->type == MESSAGE_DONE || frame->type == MESSAGE_REFUSAL ||
                        frame->type == MESSAGE_IDENTITY || frame->type == MESSAGE_CLOCK_IS;
    if (!answer) return take_unasked(host, frame->type, &message);
    if (request && !request->repeated)
        timing_round_trip(&host->timing, host->now_us - request->sent_us); /* Karn's rule */
    if (frame->type == MESSAGE_REFUSAL) return take_refusal(host, request, &message.refusal);
    if (frame->type == MESSAGE_DONE &&
        (message.done.what == MESSAGE_RENEW || message.done.what == MESSAGE_STOP))
        return take_done(host, message.done.what, &message.done);
    if (!request) return;
    const struct frame asked = request->frame;
    request->used = false;
    if (frame->type == MESSAGE_IDENTITY && asked.type == MESSAGE_HELLO)
        take_identity(host, &message.identity);
    if (frame->type == MESSAGE_CLOCK_IS && asked.type == MESSAGE_CLOCK) {
        timing_clock(&host->timing, message.clock_is.host_us, host->now_us, message.clock_is.device_us);
        host->clocks_got++;
    }
    if (frame->type == MESSAGE_DONE && asked.type == MESSAGE_SEGMENT) take_segment_done(host, &asked);
    if (frame->type == MESSAGE_DONE && asked.type == message.done.what)
        take_done(host, asked.type, &message.done);
}

void host_take_octets(struct host *host)
{
    uint8_t octets[1024];
    struct frame frame;
    for (;;) {
        const long got = link_read(host->link, octets, sizeof octets);
        if (got < 0) {
            host_fail(host,
                      "the link is gone: output is unknown; it ends by itself with the lease, within 200 ms");
            return;
        }
        for (long i = 0; i < got; i++)
            if (frame_reader_take(&host->reader, octets[i], &frame)) take_frame(host, &frame);
        if (got < (long)sizeof octets) return;
    }
}
