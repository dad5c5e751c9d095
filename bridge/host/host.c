/* The host. The goal of this code: every request answered or given up in time; the lease renewed only while
 * someone looks after it; a stop never behind a backlog; what was delivered told by the device itself. */
#include "bridge/host/host.h"

#include "bridge/host/flight.h"
#include "bridge/stimulator/device.h"
#include "bridge/wire/octets.h"
#include <math.h>
#include <stdlib.h>
#include <string.h>

enum {
    IN_FLIGHT_MAX = 8,
    SEGMENTS_IN_FLIGHT = 4,
    TRIES_MAX = 5,
    RENEW_EVERY_US = 50000,
    CLOCK_EVERY_US = 1000000,
    CLOCKS_FIRST = 6,
    AHEAD_OCTETS_MAX = 130,
    OUT_OCTETS = 8192,
    STOP_EVERY_US = 20000,
    STOP_TRIES = 25,
    START_HELD_LEAST = 8,
    CONNECT_US_MAX = 5000000
};

struct request {
    bool used;
    struct frame frame;
    uint64_t sent_us, due_us;
    unsigned tries;
    bool repeated;
};

struct host {
    struct host_options options;
    struct link *link;
    enum host_phase phase;
    uint64_t now_us, begin_us, boot;
    uint16_t sequence;
    uint32_t session;
    struct frame_reader reader;
    struct flight flight;
    struct timing timing;
    struct request request[IN_FLIGHT_MAX];
    /* line */
    uint8_t out[OUT_OCTETS];
    size_t out_count;
    uint64_t line_free_us;
    /* progress */
    struct message_identity identity;
    bool identified, want_arm, want_start, want_stop, held, over_asked, zero_known, totals_exact;
    unsigned clocks_got, limits_done;
    uint64_t arm_nonce, clock_due_us, renew_due_us, stop_due_us, echo_us, t0_device_us, t0_host_us,
        clear_wait_us;
    unsigned stops_sent, retries;
    uint32_t next_segment, acknowledged; /* next to send; all below are known to be held */
    enum device_cause cause;
    struct message_fault fault;
    bool fault_told;
    struct host_totals totals[IMAGE_CHANNELS_MAX + 1];
    unsigned eased[IMAGE_CHANNELS_MAX + 1];
    char end_text[256];
};

#define PHASE_TEXT(name, text)                                                                               \
    case name: return text;
const char *host_phase_text(enum host_phase phase)
{
    switch (phase) {
        HOST_PHASE_TABLE(PHASE_TEXT)
    }
    return "unknown";
}

static void tell(struct host *host, struct host_event event)
{
    event.now_us = host->now_us;
    if (host->options.event) host->options.event(host->options.context, &event);
}

static void enter(struct host *host, enum host_phase phase)
{
    if (host->phase == phase) return;
    host->phase = phase;
    tell(host, (struct host_event){.kind = HOST_EVENT_PHASE, .text = host_phase_text(phase)});
}

static void forget_requests(struct host *host)
{
    for (unsigned i = 0; i < IN_FLIGHT_MAX; i++) host->request[i].used = false;
}

__attribute__((format(printf, 2, 3))) static void fail(struct host *host, const char *format, ...)
{
    if (host_is_over(host)) return;
    va_list list;
    va_start(list, format);
    (void)vsnprintf(host->end_text, sizeof host->end_text, format, list);
    va_end(list);
    forget_requests(host);
    tell(host, (struct host_event){.kind = HOST_EVENT_FAULT, .text = host->end_text});
    /* whatever it was: ask for silence, three times, then leave */
    const bool output_possible =
        host->phase >= HOST_LIMITING && host->phase <= HOST_STOPPING && !host->zero_known;
    if (output_possible && host->stops_sent == 0) {
        const uint8_t delimiter = 0;
        struct frame stop = {.type = MESSAGE_STOP, .session = host->session, .sequence = host->sequence++};
        uint8_t octets[FRAME_WIRE_MAX];
        const size_t size = frame_encode(&stop, octets);
        link_flush_output(host->link);
        (void)link_write(host->link, &delimiter, 1);
        for (int i = 0; i < 3; i++) (void)link_write(host->link, octets, size);
    }
    enter(host, HOST_FAILED);
}

/* The host's own token bucket: at most AHEAD_OCTETS_MAX ahead of the line by its clock, so that a stop is not
 * behind a backlog. */
static void pump(struct host *host)
{
    const uint64_t octet_us = 10000000 / host->options.baud + 1;
    if (host->line_free_us < host->now_us) host->line_free_us = host->now_us;
    const uint64_t ahead = (host->line_free_us - host->now_us) / octet_us;
    size_t may = ahead >= AHEAD_OCTETS_MAX ? 0 : (size_t)(AHEAD_OCTETS_MAX - ahead);
    if (may > host->out_count) may = host->out_count;
    if (may == 0) return;
    const long put = link_write(host->link, host->out, may);
    if (put < 0) {
        fail(host, "the link is gone");
        return;
    }
    host->out_count -= (size_t)put;
    memmove(host->out, host->out + put, host->out_count);
    host->line_free_us += (uint64_t)put * octet_us;
}

static void put_frame(struct host *host, const struct frame *frame, bool first)
{
    uint8_t octets[FRAME_WIRE_MAX];
    const size_t size = frame_encode(frame, octets);
    if (host->out_count + size > sizeof host->out) return; /* tried again */
    /* an urgent frame goes before what waits, but not into a frame half sent: every frame begins and ends
     * with a delimiter */
    if (first) {
        size_t cut = 0;
        while (cut < host->out_count && host->out[cut] != 0) cut++;
        memmove(host->out + cut + size, host->out + cut, host->out_count - cut);
        memcpy(host->out + cut, octets, size);
    } else {
        memcpy(host->out + host->out_count, octets, size);
    }
    host->out_count += size;
    flight_keep(&host->flight, true, host->now_us, frame);
}

static bool in_flight(const struct host *host, uint8_t type)
{
    for (unsigned i = 0; i < IN_FLIGHT_MAX; i++)
        if (host->request[i].used && host->request[i].frame.type == type) return true;
    return false;
}

static unsigned count_in_flight(const struct host *host)
{
    unsigned count = 0;
    for (unsigned i = 0; i < IN_FLIGHT_MAX; i++) count += host->request[i].used;
    return count;
}

/* Time on the line of what waits and of this frame, both ways: a retry before that would be too early. */
static uint64_t line_us(const struct host *host, const struct frame *frame)
{
    return (host->out_count + frame->size + 40u) * (10000000 / host->options.baud + 1);
}

static void ask(struct host *host, uint8_t type, const void *message)
{
    for (unsigned i = 0; i < IN_FLIGHT_MAX; i++) {
        struct request *request = &host->request[i];
        if (request->used) continue;
        *request =
            (struct request){.used = true,
                             .frame = {.type = type, .session = host->session, .sequence = host->sequence++},
                             .sent_us = host->now_us};
        if (!message_encode(&request->frame, message)) {
            request->used = false;
            fail(host, "a value of %s can not be carried", message_name(type));
            return;
        }
        request->due_us = host->now_us + timing_retry_us(&host->timing, 0) + line_us(host, &request->frame);
        put_frame(host, &request->frame, false);
        return;
    }
}

static void retry(struct host *host)
{
    for (unsigned i = 0; i < IN_FLIGHT_MAX; i++) {
        struct request *request = &host->request[i];
        if (!request->used || host->now_us < request->due_us) continue;
        const bool patient = host->phase == HOST_CONNECTING && host->now_us - host->begin_us < CONNECT_US_MAX;
        if (++request->tries >= TRIES_MAX && !patient) {
            fail(host, "no answer to %s after %u tries", message_name(request->frame.type), request->tries);
            return;
        }
        request->repeated = true;
        host->retries++;
        request->due_us =
            host->now_us + timing_retry_us(&host->timing, request->tries) + line_us(host, &request->frame);
        put_frame(host, &request->frame, false);
    }
}

static struct request *request_of(struct host *host, uint16_t sequence)
{
    for (unsigned i = 0; i < IN_FLIGHT_MAX; i++)
        if (host->request[i].used && host->request[i].frame.sequence == sequence) return &host->request[i];
    return NULL;
}

static void ask_hello(struct host *host)
{
    const struct message_hello hello = {.nonce = host->options.nonce};
    ask(host, MESSAGE_HELLO, &hello);
}

static void ask_clock(struct host *host)
{
    const struct message_clock clock = {.host_us = host->now_us};
    ask(host, MESSAGE_CLOCK, &clock);
    host->clock_due_us = host->now_us + CLOCK_EVERY_US;
}

static void ask_limits(struct host *host)
{
    const struct image *image = host->options.image;
    struct message_limits limits = {.count = image->header.channels};
    (void)image_limits_encode(&image->limits[host->limits_done], image->header.channel[host->limits_done],
                              limits.limits);
    ask(host, MESSAGE_LIMITS, &limits);
}

static void ask_arm(struct host *host)
{
    const struct image *image = host->options.image;
    struct message_arm arm = {.n = image->n, .first = host->options.first};
    size_t at = 0;
    (void)image_header_encode(&image->header, arm.header);
    memcpy(arm.h0, image->h0, sizeof arm.h0);
    for (unsigned i = 0; i < image->header.channels; i++) {
        at = octets_put(arm.totals, at, host->options.totals_pulses[i], 4);
        at = octets_put(arm.totals, at, host->options.totals_charge_pc[i], 8);
    }
    ask(host, MESSAGE_ARM, &arm);
}

static void ask_start(struct host *host)
{
    const uint64_t lead_us = host->options.lead_us ? host->options.lead_us : 200000;
    const uint64_t at_us = host->now_us + (uint64_t)host->timing.offset_us + lead_us;
    const struct message_start start = {.nonce = host->arm_nonce, .at_us = at_us};
    host->t0_device_us = at_us - host->options.image->segments[host->options.first - 1].segment.start_us;
    host->t0_host_us = host->t0_device_us - (uint64_t)host->timing.offset_us;
    ask(host, MESSAGE_START, &start);
}

static void send_segments(struct host *host)
{
    const struct image *image = host->options.image;
    unsigned asked = 0;
    for (unsigned i = 0; i < IN_FLIGHT_MAX; i++)
        asked += host->request[i].used && host->request[i].frame.type == MESSAGE_SEGMENT;
    while (asked < SEGMENTS_IN_FLIGHT && host->next_segment <= image->n &&
           count_in_flight(host) < IN_FLIGHT_MAX - 2 && host->now_us >= host->clear_wait_us) {
        struct message_segment segment;
        const struct image_segment *next = &image->segments[host->next_segment - 1];
        (void)image_segment_encode(next, segment.segment);
        memcpy(segment.link, next->link, sizeof segment.link);
        ask(host, MESSAGE_SEGMENT, &segment);
        host->next_segment++;
        asked++;
    }
}

static void send_renew(struct host *host, bool alive)
{
    if (host->now_us < host->renew_due_us || !alive) return;
    const struct message_renew renew = {.echo_us = host->echo_us, .held = host->held};
    struct frame frame = {.type = MESSAGE_RENEW, .session = host->session, .sequence = host->sequence++};
    host->renew_due_us = host->now_us + RENEW_EVERY_US;
    if (host->echo_us && message_encode(&frame, &renew)) put_frame(host, &frame, true); /* never repeated */
}

static void send_stops(struct host *host)
{
    if (host->now_us < host->stop_due_us) return;
    if (host->stops_sent >= STOP_TRIES) {
        fail(host, "no answer to the stop request: output is unknown; it ends by itself with the lease, "
                   "within 200 ms");
        return;
    }
    const uint8_t delimiter = 0;
    const struct frame frame = {.type = MESSAGE_STOP, .session = host->session, .sequence = host->sequence++};
    if (host->stops_sent == 0) { /* flush, delimiter, three times: not behind anything */
        host->out_count = 0;
        link_flush_output(host->link);
        (void)link_write(host->link, &delimiter, 1);
        host->line_free_us = host->now_us;
        put_frame(host, &frame, false);
        put_frame(host, &frame, false);
    }
    put_frame(host, &frame, false);
    host->stops_sent++;
    host->stop_due_us = host->now_us + STOP_EVERY_US;
}

static void end_session(struct host *host)
{
    /* the device is safe: what did it deliver? */
    host->zero_known = true;
    forget_requests(host);
    enter(host, HOST_REPORTING);
    const struct message_report report = {0};
    ask(host, MESSAGE_REPORT, &report);
}

static bool identity_matches(struct host *host)
{
    uint8_t expected[IMAGE_IDENTITY_OCTETS];
    (void)image_identity_encode(&host->options.image->identity, expected);
    if (memcmp(host->identity.table, message_table_digest(), 8) != 0) {
        fail(host, "the device speaks another message table");
    } else if (memcmp(expected, host->identity.identity, sizeof expected) != 0) {
        fail(host,
             "the device is not the one that was planned for: it says it is \"%.32s\", the plan is for "
             "\"%.32s\" with its channels, ranges, steps and phases",
             (const char *)host->identity.identity, host->options.image->identity.unit);
    } else if (host->options.image->header.signoff == SIGNOFF_REHEARSAL && !host->identity.twin) {
        fail(host, "a rehearsal plays on a twin only, and the device does not say it is one");
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
            fail(host, "the device was reset while it was armed; its outputs are zero since");
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
    enter(host, identity->cause ? HOST_CLEARING : HOST_SYNCING);
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
        fail(host, "the device gave or skipped %llu of %llu pulses and names no cause; output is zero",
             (unsigned long long)accounted, (unsigned long long)host->options.image->header.pulses);
    } else if (host->cause == CAUSE_NONE) {
        (void)snprintf(host->end_text, sizeof host->end_text, "every pulse was given or skipped as eased");
        enter(host, HOST_FINISHED);
    } else if (host->cause == CAUSE_STOP || host->cause == CAUSE_DISARM) {
        (void)snprintf(host->end_text, sizeof host->end_text, "stopped on request; output is zero");
        enter(host, HOST_STOPPED);
    } else {
        const double at_ms = host->fault_told && host->t0_device_us
                                 ? (double)(int64_t)(host->fault.at_us - host->t0_device_us) / 1e3
                                 : 0;
        if (host->fault_told)
            fail(host, "%s (%.0f ms after the start); output is zero", cause_text(host->cause), at_ms);
        else
            fail(host, "%s; output is zero", cause_text(host->cause));
    }
}

static void take_done(struct host *host, uint8_t what, const struct message_done *done)
{
    uint8_t expected[IMAGE_LIMITS_OCTETS];
    size_t at = 0;
    switch (what) {
    case MESSAGE_CLEAR: enter(host, HOST_SYNCING); break;
    case MESSAGE_LIMITS:
        (void)image_limits_encode(&host->options.image->limits[host->limits_done],
                                  host->options.image->header.channel[host->limits_done], expected);
        if (done->size != sizeof expected || memcmp(done->detail, expected, sizeof expected) != 0) {
            fail(
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
        enter(host, HOST_ARMED);
        break;
    case MESSAGE_START: enter(host, HOST_RUNNING); break;
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
        forget_requests(host);
        ask_hello(host);
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
        fail(host, "%s was refused: %s (%u)", message_name(refusal->what), reason_text(refusal->reason),
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
    tell(host, (struct host_event){.kind = HOST_EVENT_TALLY, .at_us = tally->at_us - host->t0_device_us});
}

static void take_sample(struct host *host, const struct message_sample *sample)
{
    for (unsigned i = 0; i < SAMPLE_READINGS; i++) {
        size_t at = 12u * i;
        const uint64_t dt_us = octets_take(sample->readings, &at, 2) * 10;
        const int32_t force_mn = (int32_t)(uint32_t)octets_take(sample->readings, &at, 4);
        if (host->phase < HOST_RUNNING || (int64_t)(sample->time_us + dt_us - host->t0_device_us) < 0)
            continue;
        tell(host, (struct host_event){.kind = HOST_EVENT_FORCE,
                                       .at_us = sample->time_us + dt_us - host->t0_device_us,
                                       .force_n = force_mn / 1e3});
    }
}

static void take_unasked(struct host *host, uint8_t type, const union message_any *message)
{
    if (type == MESSAGE_TALLY) take_tally(host, &message->tally);
    if (type == MESSAGE_SAMPLE) take_sample(host, &message->sample);
    if (type == MESSAGE_DELIVERED)
        tell(host, (struct host_event){.kind = HOST_EVENT_DELIVERED,
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
            fail(host, "it was armed for two minutes and not begun; arm again");
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
    struct request *request = request_of(host, frame->sequence);
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

static void take_octets(struct host *host)
{
    uint8_t octets[1024];
    struct frame frame;
    for (;;) {
        const long got = link_read(host->link, octets, sizeof octets);
        if (got < 0) {
            fail(host,
                 "the link is gone: output is unknown; it ends by itself with the lease, within 200 ms");
            return;
        }
        for (long i = 0; i < got; i++)
            if (frame_reader_take(&host->reader, octets[i], &frame)) take_frame(host, &frame);
        if (got < (long)sizeof octets) return;
    }
}

static void step_setting_up(struct host *host)
{
    switch (host->phase) {
    case HOST_CONNECTING:
        if (!in_flight(host, MESSAGE_HELLO)) ask_hello(host);
        break;
    case HOST_CLEARING:
        if (!in_flight(host, MESSAGE_CLEAR))
            ask(host, MESSAGE_CLEAR, &(struct message_clear){.cause = host->identity.cause});
        break;
    case HOST_SYNCING:
        if (host->clocks_got >= CLOCKS_FIRST)
            enter(host, HOST_READY);
        else if (!in_flight(host, MESSAGE_CLOCK))
            ask_clock(host);
        break;
    case HOST_READY:
        if (host->want_arm) enter(host, HOST_LIMITING);
        break;
    case HOST_LIMITING:
        if (host->limits_done == host->options.image->header.channels)
            enter(host, HOST_ARMING);
        else if (!in_flight(host, MESSAGE_LIMITS) && host->now_us >= host->clear_wait_us)
            ask_limits(host);
        break;
    case HOST_ARMING:
        if (in_flight(host, MESSAGE_ARM) || in_flight(host, MESSAGE_CONFIRM)) break;
        if (!host->arm_nonce) {
            ask_arm(host);
        } else {
            struct message_confirm confirm = {.nonce = host->arm_nonce};
            memcpy(confirm.root, host->options.image->root, sizeof confirm.root);
            ask(host, MESSAGE_CONFIRM, &confirm);
        }
        break;
    default: break;
    }
}

static void step_armed(struct host *host, bool alive)
{
    send_renew(host, alive);
    send_segments(host);
    if (host->now_us >= host->clock_due_us && !in_flight(host, MESSAGE_CLOCK)) ask_clock(host);
    if (host->phase == HOST_ARMED && host->want_start && host_may_start(host)) {
        enter(host, HOST_STARTING);
        ask_start(host);
    }
}

void host_step(struct host *host, uint64_t now_us, bool alive)
{
    host->now_us = now_us;
    if (host_is_over(host)) return;
    take_octets(host);
    if (host->want_stop && host->phase < HOST_LIMITING) {
        (void)snprintf(host->end_text, sizeof host->end_text, "stopped before anything was armed");
        host->zero_known = true;
        forget_requests(host);
        enter(host, HOST_STOPPED);
    } else if (host->want_stop && host->phase < HOST_STOPPING) {
        forget_requests(host);
        enter(host, HOST_STOPPING);
        host->stop_due_us = host->now_us;
    }
    if (host->phase < HOST_ARMED) step_setting_up(host);
    if (host->phase >= HOST_ARMED && host->phase <= HOST_RUNNING && !host->over_asked)
        step_armed(host, alive);
    if (host->phase == HOST_STOPPING) send_stops(host);
    if (!host_is_over(host)) retry(host);
    if (!host_is_over(host)) pump(host);
}

uint64_t host_next_us(const struct host *host)
{
    return host_is_over(host) ? UINT64_MAX : host->now_us + (host->out_count ? 1000 : 5000);
}

enum status host_new(const struct host_options *options, struct link *link, uint64_t now_us,
                     struct host **made, struct message *why)
{
    if (options->first < 1 || options->first >= options->image->n)
        return status_fail(why, STATUS_USAGE, "the image has segments 1 to %u, not %u", options->image->n - 1,
                           options->first);
    struct host *host = calloc(1, sizeof *host);
    if (!host) return status_fail(why, STATUS_INTERNAL, "no memory for the host");
    host->options = *options;
    host->link = link;
    host->now_us = host->begin_us = host->line_free_us = now_us;
    host->next_segment = host->acknowledged = 1;
    host->sequence = (uint16_t)options->nonce;
    *made = host;
    return STATUS_OK;
}

void host_free(struct host *host)
{
    free(host);
}

void host_arm(struct host *host)
{
    host->want_arm = true;
}
void host_start(struct host *host)
{
    host->want_start = true;
}
void host_request_stop(struct host *host)
{
    host->want_stop = true;
}
void host_hold(struct host *host, bool held)
{
    host->held = held;
}

void host_ease(struct host *host, unsigned channel, unsigned thousandths)
{
    if (host->phase < HOST_ARMED || host->phase > HOST_RUNNING) return;
    const struct message_ease ease = {.channel = (uint8_t)channel,
                                      .thousandths =
                                          (uint16_t)(thousandths > EASE_FULL ? EASE_FULL : thousandths)};
    ask(host, MESSAGE_EASE, &ease);
}

enum host_phase host_phase(const struct host *host)
{
    return host->phase;
}
bool host_is_over(const struct host *host)
{
    return host->phase >= HOST_FINISHED;
}

bool host_may_start(const struct host *host)
{
    const uint32_t wanted = host->options.first + START_HELD_LEAST, all = host->options.image->n;
    return host->phase == HOST_ARMED && host->acknowledged > (wanted < all ? wanted : all);
}

const char *host_end_text(const struct host *host)
{
    return host->end_text;
}
enum device_cause host_cause(const struct host *host)
{
    return host->cause;
}
bool host_output_known_zero(const struct host *host)
{
    return host->zero_known;
}
const struct message_identity *host_identity(const struct host *host)
{
    return host->identified ? &host->identity : NULL;
}
bool host_totals_exact(const struct host *host)
{
    return host->totals_exact;
}
double host_clock_uncertainty_ms(const struct host *host)
{
    return host->timing.clock_known ? (double)host->timing.best_us / 2e3 : (double)NAN;
}
double host_round_trip_ms(const struct host *host)
{
    return host->timing.any ? host->timing.smoothed_us / 1e3 : (double)NAN;
}
unsigned host_retries(const struct host *host)
{
    return host->retries;
}
uint64_t host_start_host_us(const struct host *host)
{
    return host->phase >= HOST_RUNNING ? host->t0_host_us : 0;
}
void host_flight_write(const struct host *host, FILE *out)
{
    flight_write(&host->flight, out);
}

struct host_totals host_totals(const struct host *host, unsigned channel)
{
    return channel >= 1 && channel <= IMAGE_CHANNELS_MAX ? host->totals[channel] : (struct host_totals){0};
}
