/* The host. The goal of this code: every request answered or given up in time; the lease renewed only while
 * someone looks after it; a stop never behind a backlog; what was delivered told by the device itself. */
#include "bridge/host/state.h"

#include <math.h>
#include <stdlib.h>
#include <string.h>

#define PHASE_TEXT(name, text)                                                                               \
    case name: return text;
const char *host_phase_text(enum host_phase phase)
{
    switch (phase) {
        HOST_PHASE_TABLE(PHASE_TEXT)
    }
    return "unknown";
}

void host_tell(struct host *host, struct host_event event)
{
    event.now_us = host->now_us;
    if (host->options.event) host->options.event(host->options.context, &event);
}

void host_enter(struct host *host, enum host_phase phase)
{
    if (host->phase == phase) return;
    host->phase = phase;
    host_tell(host, (struct host_event){.kind = HOST_EVENT_PHASE, .text = host_phase_text(phase)});
}

void host_forget_requests(struct host *host)
{
    for (unsigned i = 0; i < IN_FLIGHT_MAX; i++) host->request[i].used = false;
}

__attribute__((format(printf, 2, 3))) void host_fail(struct host *host, const char *format, ...)
{
    if (host_is_over(host)) return;
    va_list list;
    va_start(list, format);
    (void)vsnprintf(host->end_text, sizeof host->end_text, format, list);
    va_end(list);
    host_forget_requests(host);
    host_tell(host, (struct host_event){.kind = HOST_EVENT_FAULT, .text = host->end_text});
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
    host_enter(host, HOST_FAILED);
}

static void step_setting_up(struct host *host)
{
    switch (host->phase) {
    case HOST_CONNECTING:
        if (!host_in_flight(host, MESSAGE_HELLO)) host_ask_hello(host);
        break;
    case HOST_CLEARING:
        if (!host_in_flight(host, MESSAGE_CLEAR))
            host_ask(host, MESSAGE_CLEAR, &(struct message_clear){.cause = host->identity.cause});
        break;
    case HOST_SYNCING:
        if (host->clocks_got >= CLOCKS_FIRST)
            host_enter(host, HOST_READY);
        else if (!host_in_flight(host, MESSAGE_CLOCK))
            host_ask_clock(host);
        break;
    case HOST_READY:
        if (host->want_arm) host_enter(host, HOST_LIMITING);
        break;
    case HOST_LIMITING:
        if (host->limits_done == host->options.image->header.channels)
            host_enter(host, HOST_ARMING);
        else if (!host_in_flight(host, MESSAGE_LIMITS) && host->now_us >= host->clear_wait_us)
            host_ask_limits(host);
        break;
    case HOST_ARMING:
        if (host_in_flight(host, MESSAGE_ARM) || host_in_flight(host, MESSAGE_CONFIRM)) break;
        if (!host->arm_nonce) {
            host_ask_arm(host);
        } else {
            struct message_confirm confirm = {.nonce = host->arm_nonce};
            memcpy(confirm.root, host->options.image->root, sizeof confirm.root);
            host_ask(host, MESSAGE_CONFIRM, &confirm);
        }
        break;
    default: break;
    }
}

static void step_armed(struct host *host, bool alive)
{
    host_send_renew(host, alive);
    host_send_segments(host);
    if (host->now_us >= host->clock_due_us && !host_in_flight(host, MESSAGE_CLOCK)) host_ask_clock(host);
    if (host->phase == HOST_ARMED && host->want_start && host_may_start(host)) {
        host_enter(host, HOST_STARTING);
        host_ask_start(host);
    }
}

void host_step(struct host *host, uint64_t now_us, bool alive)
{
    host->now_us = now_us;
    if (host_is_over(host)) return;
    host_take_octets(host);
    if (host->want_stop && host->phase < HOST_LIMITING) {
        (void)snprintf(host->end_text, sizeof host->end_text, "stopped before anything was armed");
        host->zero_known = true;
        host_forget_requests(host);
        host_enter(host, HOST_STOPPED);
    } else if (host->want_stop && host->phase < HOST_STOPPING) {
        host_forget_requests(host);
        host_enter(host, HOST_STOPPING);
        host->stop_due_us = host->now_us;
    }
    if (host->phase < HOST_ARMED) step_setting_up(host);
    if (host->phase >= HOST_ARMED && host->phase <= HOST_RUNNING && !host->over_asked)
        step_armed(host, alive);
    if (host->phase == HOST_STOPPING) host_send_stops(host);
    if (!host_is_over(host)) host_retry(host);
    if (!host_is_over(host)) host_pump(host);
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
    host_ask(host, MESSAGE_EASE, &ease);
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
