/* Host: connects to a stimulator (or its twin), arms one image, uploads it, starts it, keeps its lease, stops
 * it. A state machine that is stepped with the time: the same code runs on the real clock and on a simulated
 * one. */
#ifndef PULSEWRIGHT_BRIDGE_HOST_HOST_H
#define PULSEWRIGHT_BRIDGE_HOST_HOST_H
#include "bridge/link/link.h"
#include "bridge/wire/image.h"
#include "bridge/wire/message.h"
#include "core/status/status.h"
#include <stdbool.h>
#include <stdint.h>
#include <stdio.h>

/* phase, words for a person */
#define HOST_PHASE_TABLE(X)                                                                                  \
    X(HOST_CONNECTING, "connecting")                                                                         \
    X(HOST_CLEARING, "clearing an earlier cause")                                                            \
    X(HOST_SYNCING, "comparing clocks")                                                                      \
    X(HOST_READY, "connected")                                                                               \
    X(HOST_LIMITING, "handing over the limits")                                                              \
    X(HOST_ARMING, "arming")                                                                                 \
    X(HOST_ARMED, "armed")                                                                                   \
    X(HOST_STARTING, "starting")                                                                             \
    X(HOST_RUNNING, "running")                                                                               \
    X(HOST_STOPPING, "stopping")                                                                             \
    X(HOST_REPORTING, "asking what was delivered")                                                           \
    X(HOST_FINISHED, "finished")                                                                             \
    X(HOST_STOPPED, "stopped")                                                                               \
    X(HOST_FAILED, "ended by a fault")
enum host_phase {
#define HOST_PHASE_ENUM(name, text) name,
    HOST_PHASE_TABLE(HOST_PHASE_ENUM)
#undef HOST_PHASE_ENUM
};
const char *host_phase_text(enum host_phase phase);

struct host_totals {
    uint32_t pulses, skipped;
    uint64_t charge_pc;
};

enum host_event_kind {
    HOST_EVENT_PHASE,
    HOST_EVENT_TALLY,
    HOST_EVENT_FORCE,
    HOST_EVENT_DELIVERED,
    HOST_EVENT_FAULT
};
struct host_event {
    enum host_event_kind kind;
    uint64_t now_us;  /* host clock */
    uint64_t at_us;   /* image time (0: the image's start); of FORCE, DELIVERED, TALLY */
    double force_n;   /* FORCE */
    unsigned channel; /* DELIVERED */
    unsigned duration_us;
    uint32_t set_ua, measured_ua;
    const char *text; /* PHASE, FAULT: words for a person */
};

struct host_options {
    const struct image *image; /* outlives the host */
    uint32_t first;            /* index of the first segment to play, 1 .. */
    unsigned baud;
    uint64_t nonce;   /* new for each session, from a source that never repeats */
    uint64_t lead_us; /* from the start's asking to the first pulse; 50 ms to 2 s, 0: 200 ms */
    uint32_t totals_pulses[IMAGE_CHANNELS_MAX]; /* this person's so far, by the header's channels */
    uint64_t totals_charge_pc[IMAGE_CHANNELS_MAX];
    void (*event)(void *context, const struct host_event *event); /* NULL: none */
    void *context;
};

struct host;
/* The link outlives the host. */
enum status host_new(const struct host_options *options, struct link *link, uint64_t now_us,
                     struct host **host, struct message *why);
void host_free(struct host *host);
/* Runs what is due. Call often (at host_next_us at the latest and when octets arrived). `alive`: limits and
 * the stop request are being looked after; false: the lease is not renewed. */
void host_step(struct host *host, uint64_t now_us, bool alive);
uint64_t host_next_us(const struct host *host);
/* The three steps, each its own call: after READY, arm; after ARMED (enough segments held), start. */
void host_arm(struct host *host);
void host_start(struct host *host);
void host_request_stop(struct host *host);
/* Strength in thousandths of what was signed, a channel or EASE_ALL. */
void host_ease(struct host *host, unsigned channel, unsigned thousandths);
void host_hold(struct host *host, bool held); /* held images: is the key held? */

enum host_phase host_phase(const struct host *host);
bool host_is_over(const struct host *host);
bool host_may_start(const struct host *host);       /* armed and the first segments held */
const char *host_end_text(const struct host *host); /* why it ended, in words */
enum device_cause host_cause(const struct host *host);
bool host_output_known_zero(const struct host *host); /* the device said it is safe */
const struct message_identity *host_identity(const struct host *host);
struct host_totals host_totals(const struct host *host, unsigned channel);
bool host_totals_exact(const struct host *host); /* told by the device after the end */
double host_clock_uncertainty_ms(const struct host *host);
double host_round_trip_ms(const struct host *host); /* smoothed */
unsigned host_retries(const struct host *host);
uint64_t host_start_host_us(const struct host *host); /* host time of image time 0; 0: not started */
/* The last 256 frames each way, oldest first: time, direction, name, octets in hex. */
void host_flight_write(const struct host *host, FILE *out);

#endif
