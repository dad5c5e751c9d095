/* The twin in real time: a pseudo-terminal, a clock, a loop. The goal of this code: a host finds the same
 * thing behind this address as behind a serial port, survives nothing it would not survive there, and a twin
 * never outlives the one that started it. */
#include "bridge/twin/twin.h"

#include <errno.h>
#include <fcntl.h>
#include <poll.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/prctl.h>
#include <sys/wait.h>
#include <termios.h>
#include <time.h>
#include <unistd.h>

struct terminal {
    int master, slave;
    char address[256];
};

static uint64_t monotonic_us(void)
{
    struct timespec now;
    (void)clock_gettime(CLOCK_MONOTONIC, &now);
    return (uint64_t)now.tv_sec * 1000000u + (uint64_t)now.tv_nsec / 1000u;
}

/* The slave stays open here, raw, so that a host that goes away leaves the terminal as it is. */
static enum status open_terminal(struct terminal *terminal, struct message *why)
{
    char name[200];
    struct termios attributes;
    terminal->master = posix_openpt(O_RDWR | O_NOCTTY | O_CLOEXEC | O_NONBLOCK);
    if (terminal->master < 0 || grantpt(terminal->master) != 0 || unlockpt(terminal->master) != 0 ||
        ptsname_r(terminal->master, name, sizeof name) != 0)
        return status_fail(why, STATUS_DEVICE, "no pseudo-terminal: %s", strerror(errno));
    terminal->slave = open(name, O_RDWR | O_NOCTTY | O_CLOEXEC);
    if (terminal->slave < 0 || tcgetattr(terminal->slave, &attributes) != 0)
        return status_fail(why, STATUS_DEVICE, "%s: %s", name, strerror(errno));
    cfmakeraw(&attributes);
    if (tcsetattr(terminal->slave, TCSANOW, &attributes) != 0)
        return status_fail(why, STATUS_DEVICE, "%s: %s", name, strerror(errno));
    (void)snprintf(terminal->address, sizeof terminal->address, "pty:%s", name);
    return STATUS_OK;
}

static void loop(struct twin *twin, struct link *wire, const volatile sig_atomic_t *stop)
{
    while (!*stop) {
        const uint64_t now_us = monotonic_us();
        twin_step(twin, now_us);
        const uint64_t next_us = twin_next_us(twin);
        uint64_t wait_us = next_us > now_us ? next_us - now_us : 0;
        if (wait_us > 50000) wait_us = 50000;
        struct pollfd descriptor = {.fd = link_descriptor(wire), .events = POLLIN};
        const struct timespec wait = {.tv_sec = 0, .tv_nsec = (long)wait_us * 1000};
        const int ready = ppoll(&descriptor, 1, &wait, NULL);
        if (ready > 0 && (descriptor.revents &
                          POLLIN)) { /* octets come at the line's speed: a short pause lets them gather */
            const struct timespec pause = {.tv_nsec = 300000};
            (void)nanosleep(&pause, NULL);
        }
    }
}

enum status twin_run(const struct twin_options *options, void (*announce)(void *context, const char *address),
                     void *context, const volatile sig_atomic_t *stop, struct message *why)
{
    struct terminal terminal = {-1, -1, ""};
    struct link *wire = NULL;
    struct twin *twin = NULL;
    enum status status = open_terminal(&terminal, why);
    if (status == STATUS_OK) status = link_of_master(terminal.master, &wire, why);
    if (status == STATUS_OK) status = twin_new(options, wire, monotonic_us(), &twin, why);
    if (status == STATUS_OK) {
        announce(context, terminal.address);
        loop(twin, wire, stop);
    }
    twin_free(twin);
    if (wire)
        link_close(wire);
    else if (terminal.master >= 0)
        (void)close(terminal.master);
    if (terminal.slave >= 0) (void)close(terminal.slave);
    return status;
}

static volatile sig_atomic_t child_stop;

static void stop_child(int signal_number)
{
    (void)signal_number;
    child_stop = 1;
}

static void announce_to_pipe(void *context, const char *address)
{
    const int out = *(const int *)context;
    if (write(out, address, strlen(address) + 1) < 0) child_stop = 1;
}

static void run_child(const struct twin_options *options, int out, pid_t parent)
{
    struct message why = {""};
    (void)prctl(PR_SET_PDEATHSIG, SIGTERM);
    (void)signal(SIGTERM, stop_child);
    (void)signal(SIGINT, SIG_IGN); /* the terminal's stop is the host's to handle; the parent ends this */
    if (getppid() != parent) _exit(0);
    if (twin_run(options, announce_to_pipe, &out, &child_stop, &why) != STATUS_OK) {
        char text[MESSAGE_SIZE + 8];
        (void)snprintf(text, sizeof text, "!%s", why.text);
        if (write(out, text, strlen(text) + 1) < 0) _exit(1);
    }
    _exit(0);
}

enum status twin_start_process(const struct twin_options *options, char address[256], int *process,
                               struct message *why)
{
    int ends[2];
    char text[MESSAGE_SIZE] = "";
    if (pipe2(ends, O_CLOEXEC) != 0) return status_fail(why, STATUS_INTERNAL, "no pipe: %s", strerror(errno));
    const pid_t parent = getpid(), child = fork();
    if (child == 0) {
        (void)close(ends[0]);
        run_child(options, ends[1], parent);
    }
    (void)close(ends[1]);
    struct pollfd ready = {.fd = ends[0], .events = POLLIN};
    const bool told = child > 0 && poll(&ready, 1, 10000) == 1 && read(ends[0], text, sizeof text - 1) > 0;
    (void)close(ends[0]);
    if (told && text[0] != '!') {
        (void)snprintf(address, 256, "%.255s", text);
        *process = (int)child;
        return STATUS_OK;
    }
    if (child > 0) twin_stop_process((int)child);
    return status_fail(why, STATUS_DEVICE, "the twin did not start: %s", told ? text + 1 : "no answer");
}

void twin_stop_process(int process)
{
    if (process <= 0) return;
    (void)kill((pid_t)process, SIGTERM);
    (void)waitpid((pid_t)process, NULL, 0);
}
