/* What a host holds while it runs, and the calls between its three files: line.c (what is asked and sent),
 * take.c (what is heard), host.c (what follows). Private to bridge/host. */
#ifndef PULSEWRIGHT_BRIDGE_HOST_STATE_H
#define PULSEWRIGHT_BRIDGE_HOST_STATE_H
#include "bridge/host/flight.h"
#include "bridge/host/host.h"
#include "bridge/stimulator/device.h"

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

/* host.c */
void host_tell(struct host *host, struct host_event event);
void host_enter(struct host *host, enum host_phase phase);
void host_forget_requests(struct host *host);
__attribute__((format(printf, 2, 3))) void host_fail(struct host *host, const char *format, ...);
/* line.c */
void host_pump(struct host *host);
bool host_in_flight(const struct host *host, uint8_t type);
void host_ask(struct host *host, uint8_t type, const void *message);
void host_retry(struct host *host);
struct request *host_request_of(struct host *host, uint16_t sequence);
void host_ask_hello(struct host *host);
void host_ask_clock(struct host *host);
void host_ask_limits(struct host *host);
void host_ask_arm(struct host *host);
void host_ask_start(struct host *host);
void host_send_segments(struct host *host);
void host_send_renew(struct host *host, bool alive);
void host_send_stops(struct host *host);
/* take.c */
void host_take_octets(struct host *host);

#endif
