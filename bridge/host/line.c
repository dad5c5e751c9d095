/* The host: what is asked and sent. The goal of this code: every request answered or given up in time, and a
 * stop never behind a backlog. */
#include "bridge/host/state.h"

#include "bridge/wire/octets.h"
#include <string.h>

/* The host's own token bucket: at most AHEAD_OCTETS_MAX ahead of the line by its clock, so that a stop is not
 * behind a backlog. */
void host_pump(struct host *host)
{
    const uint64_t octet_us = 10000000 / host->options.baud + 1;
    if (host->line_free_us < host->now_us) host->line_free_us = host->now_us;
    const uint64_t ahead = (host->line_free_us - host->now_us) / octet_us;
    size_t may = ahead >= AHEAD_OCTETS_MAX ? 0 : (size_t)(AHEAD_OCTETS_MAX - ahead);
    if (may > host->out_count) may = host->out_count;
    if (may == 0) return;
    const long put = link_write(host->link, host->out, may);
    if (put < 0) {
        host_fail(host, "the link is gone");
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

bool host_in_flight(const struct host *host, uint8_t type)
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

void host_ask(struct host *host, uint8_t type, const void *message)
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
            host_fail(host, "a value of %s can not be carried", message_name(type));
            return;
        }
        request->due_us = host->now_us + timing_retry_us(&host->timing, 0) + line_us(host, &request->frame);
        put_frame(host, &request->frame, false);
        return;
    }
}

void host_retry(struct host *host)
{
    for (unsigned i = 0; i < IN_FLIGHT_MAX; i++) {
        struct request *request = &host->request[i];
        if (!request->used || host->now_us < request->due_us) continue;
        const bool patient = host->phase == HOST_CONNECTING && host->now_us - host->begin_us < CONNECT_US_MAX;
        if (++request->tries >= TRIES_MAX && !patient) {
            host_fail(host, "no answer to %s after %u tries", message_name(request->frame.type),
                      request->tries);
            return;
        }
        request->repeated = true;
        host->retries++;
        request->due_us =
            host->now_us + timing_retry_us(&host->timing, request->tries) + line_us(host, &request->frame);
        put_frame(host, &request->frame, false);
    }
}

struct request *host_request_of(struct host *host, uint16_t sequence)
{
    for (unsigned i = 0; i < IN_FLIGHT_MAX; i++)
        if (host->request[i].used && host->request[i].frame.sequence == sequence) return &host->request[i];
    return NULL;
}

void host_ask_hello(struct host *host)
{
    const struct message_hello hello = {.nonce = host->options.nonce};
    host_ask(host, MESSAGE_HELLO, &hello);
}

void host_ask_clock(struct host *host)
{
    const struct message_clock clock = {.host_us = host->now_us};
    host_ask(host, MESSAGE_CLOCK, &clock);
    host->clock_due_us = host->now_us + CLOCK_EVERY_US;
}

void host_ask_limits(struct host *host)
{
    const struct image *image = host->options.image;
    struct message_limits limits = {.count = image->header.channels};
    (void)image_limits_encode(&image->limits[host->limits_done], image->header.channel[host->limits_done],
                              limits.limits);
    host_ask(host, MESSAGE_LIMITS, &limits);
}

void host_ask_arm(struct host *host)
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
    host_ask(host, MESSAGE_ARM, &arm);
}

void host_ask_start(struct host *host)
{
    const uint64_t lead_us = host->options.lead_us ? host->options.lead_us : 200000;
    const uint64_t at_us = host->now_us + (uint64_t)host->timing.offset_us + lead_us;
    const struct message_start start = {.nonce = host->arm_nonce, .at_us = at_us};
    host->t0_device_us = at_us - host->options.image->segments[host->options.first - 1].segment.start_us;
    host->t0_host_us = host->t0_device_us - (uint64_t)host->timing.offset_us;
    host_ask(host, MESSAGE_START, &start);
}

void host_send_segments(struct host *host)
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
        host_ask(host, MESSAGE_SEGMENT, &segment);
        host->next_segment++;
        asked++;
    }
}

void host_send_renew(struct host *host, bool alive)
{
    if (host->now_us < host->renew_due_us || !alive) return;
    const struct message_renew renew = {.echo_us = host->echo_us, .held = host->held};
    struct frame frame = {.type = MESSAGE_RENEW, .session = host->session, .sequence = host->sequence++};
    host->renew_due_us = host->now_us + RENEW_EVERY_US;
    if (host->echo_us && message_encode(&frame, &renew)) put_frame(host, &frame, true); /* never repeated */
}

void host_send_stops(struct host *host)
{
    if (host->now_us < host->stop_due_us) return;
    if (host->stops_sent >= STOP_TRIES) {
        host_fail(host, "no answer to the stop request: output is unknown; it ends by itself with the lease, "
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
