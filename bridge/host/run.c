/* The real-time loop. The goal of this code: the lease is renewed only by the loop that also looks at the
 * stop request. */
#include "bridge/host/run.h"

#include <poll.h>
#include <signal.h>
#include <time.h>
#include <unistd.h>

static volatile sig_atomic_t stop_asked;

static void ask_stop(int signal_number)
{
    (void)signal_number;
    stop_asked = 1;
}

void host_catch_signals(void)
{
    const struct sigaction action = {.sa_handler = ask_stop};
    (void)sigaction(SIGINT, &action, NULL);
    (void)sigaction(SIGTERM, &action, NULL);
    (void)sigaction(SIGHUP, &action, NULL);
    (void)signal(SIGPIPE, SIG_IGN);
}

uint64_t host_clock_us(void)
{
    struct timespec now;
    (void)clock_gettime(CLOCK_MONOTONIC, &now);
    return (uint64_t)now.tv_sec * 1000000u + (uint64_t)now.tv_nsec / 1000u;
}

static int read_key(int descriptor)
{
    unsigned char key = 0;
    return read(descriptor, &key, 1) == 1 ? key : 0;
}

void host_run(struct host *host, struct link *link, int key_descriptor, host_turn turn, void *context)
{
    while (!host_is_over(host)) {
        struct pollfd waits[2] = {{.fd = link_descriptor(link), .events = POLLIN},
                                  {.fd = key_descriptor, .events = POLLIN}};
        const uint64_t now_us = host_clock_us(), next_us = host_next_us(host);
        uint64_t wait_us = next_us > now_us ? next_us - now_us : 0;
        if (wait_us > 5000) wait_us = 5000;
        const struct timespec wait = {.tv_nsec = (long)wait_us * 1000};
        const int ready = ppoll(waits, key_descriptor >= 0 ? 2 : 1, &wait, NULL);
        const int key =
            ready > 0 && key_descriptor >= 0 && (waits[1].revents & POLLIN) ? read_key(key_descriptor) : 0;
        if (!turn(context, host, key) || stop_asked) host_request_stop(host);
        host_step(host, host_clock_us(), true);
    }
}
