/* The host is killed while it streams, in real time: the twin's own log shows that its pulses end within the
 * lease plus one period, that nothing resumes, and that a fresh host then plays on the same twin. A run in
 * which this machine stalled is void and tried again. */
#include "support/near.h"

#include <fcntl.h>
#include <signal.h>
#include <stdbool.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/wait.h>
#include <time.h>
#include <unistd.h>

enum { LEASE_MS = 200, PERIOD_MS = 34, SLACK_MS = 15, STALL_MS = 50, KILLS = 6, TRIES = 3, SKIP = 77 };

static char bridge_path[600], folder[600], train_path[700], log_path[700];

static double now_ms(void)
{
    struct timespec now;
    (void)clock_gettime(CLOCK_MONOTONIC, &now);
    return (double)now.tv_sec * 1e3 + (double)now.tv_nsec / 1e6;
}

/* Sleeps; gives by how much this machine was late. */
static double sleep_ms(double ms)
{
    const double before = now_ms();
    const struct timespec wait = {.tv_sec = (time_t)(ms / 1e3),
                                  .tv_nsec = (long)((ms - 1e3 * (double)(time_t)(ms / 1e3)) * 1e6)};
    (void)nanosleep(&wait, NULL);
    return now_ms() - before - ms;
}

static pid_t start(char *const arguments[], int out)
{
    const pid_t child = fork();
    if (child != 0) return child;
    const int nowhere = open("/dev/null", O_RDWR);
    (void)dup2(nowhere, 0);
    (void)dup2(out >= 0 ? out : nowhere, 1);
    (void)dup2(nowhere, 2);
    (void)execv(arguments[0], arguments);
    _exit(127);
}

static pid_t start_twin(char address[256])
{
    int ends[2];
    char *const arguments[] = {
        bridge_path, "twin", "--stimulator", PULSEWRIGHT_SOURCE "/profiles/stimulators/bench-a.yaml", "--log",
        log_path,    NULL};
    assert_int_equal(pipe(ends), 0);
    const pid_t child = start(arguments, ends[1]);
    (void)close(ends[1]);
    ssize_t got = read(ends[0], address, 255);
    (void)close(ends[0]);
    assert_true(got > 5);
    address[got] = '\0';
    address[strcspn(address, "\n")] = '\0';
    return child;
}

static pid_t start_stream(char *address)
{
    char *const arguments[] = {bridge_path,
                               "stream",
                               train_path,
                               "--to",
                               address,
                               "--rehearse",
                               "--profile",
                               PULSEWRIGHT_SOURCE "/profiles/people/p-001.yaml",
                               "--stimulator",
                               PULSEWRIGHT_SOURCE "/profiles/stimulators/bench-a.yaml",
                               NULL};
    return start(arguments, -1);
}

/* Time of the last pulse in the twin's log, ms of the monotonic clock; 0: none. */
static double last_pulse_ms(unsigned *count)
{
    char line[128];
    double last = 0;
    FILE *in = fopen(log_path, "r");
    *count = 0;
    while (in && fgets(line, sizeof line, in)) {
        unsigned long long at_us;
        if (sscanf(line, "%llu,", &at_us) != 1) continue;
        last = (double)at_us / 1e3;
        (*count)++;
    }
    if (in) fclose(in);
    return last;
}

/* Waits until the twin gives pulses. */
static bool wait_for_pulses(void)
{
    unsigned count = 0;
    for (int i = 0; i < 500 && count < 3; i++) {
        (void)sleep_ms(20);
        (void)last_pulse_ms(&count);
    }
    return count >= 3;
}

/* One kill; false: void, this machine stalled. */
static bool kill_once(double after_ms, double *late_ms)
{
    char address[256];
    unsigned count = 0, later = 0;
    (void)unlink(log_path);
    const pid_t twin = start_twin(address), host = start_stream(address);
    assert_true(wait_for_pulses());
    double stalled = sleep_ms(after_ms);
    const double killed_ms = now_ms();
    assert_int_equal(kill(host, SIGKILL), 0);
    (void)waitpid(host, NULL, 0);
    for (int i = 0; i < 60; i++) {
        const double more = sleep_ms(10);
        if (more > stalled) stalled = more;
    }
    const double last_ms = last_pulse_ms(&count);
    (void)sleep_ms(400);
    (void)last_pulse_ms(&later);
    (void)kill(twin, SIGTERM);
    (void)waitpid(twin, NULL, 0);
    assert_int_equal(count, later); /* nothing resumes by itself */
    *late_ms = last_ms - killed_ms;
    const bool beyond = *late_ms > LEASE_MS + PERIOD_MS + SLACK_MS;
    if (beyond && stalled > STALL_MS) return false;
    assert_false(beyond);
    return true;
}

static void pulses_end_within_the_lease_when_the_host_is_killed(void **state)
{
    (void)state;
    double worst = -1e9;
    srand(20261201);
    for (int i = 0; i < KILLS; i++) {
        double late_ms = 0;
        int tries = 0;
        const double after_ms = 100 + rand() % 900;
        while (!kill_once(after_ms, &late_ms))
            if (++tries == TRIES) {
                print_message("skipped: machine stalled\n");
                exit(SKIP);
            }
        if (late_ms > worst) worst = late_ms;
    }
    print_message("last pulse at most %.0f ms after the kill (lease %d ms, period %d ms)\n", worst, LEASE_MS,
                  PERIOD_MS);
}

static void a_fresh_host_plays_on_the_same_twin(void **state)
{
    (void)state;
    char address[256];
    unsigned first = 0, second = 0;
    int ended = 0;
    (void)unlink(log_path);
    const pid_t twin = start_twin(address);
    const pid_t host = start_stream(address);
    assert_true(wait_for_pulses());
    (void)kill(host, SIGKILL);
    (void)waitpid(host, NULL, 0);
    (void)sleep_ms(500);
    (void)last_pulse_ms(&first);
    const pid_t fresh = start_stream(address);
    (void)waitpid(fresh, &ended, 0);
    (void)last_pulse_ms(&second);
    (void)kill(twin, SIGTERM);
    (void)waitpid(twin, NULL, 0);
    assert_true(WIFEXITED(ended) && WEXITSTATUS(ended) == 0);
    assert_int_equal(second - first, 90); /* the whole train of 3 s at 30 pps, and no pulse more */
}

int main(void)
{
    char command[700];
    (void)snprintf(bridge_path, sizeof bridge_path, "%s/bin/pulsewright-bridge", PULSEWRIGHT_BUILD);
    if (access(bridge_path, X_OK) != 0) return SKIP;
    (void)snprintf(folder, sizeof folder, "%s/kill-test-%ld", PULSEWRIGHT_BUILD, (long)getpid());
    (void)snprintf(log_path, sizeof log_path, "%s/log.csv", folder);
    (void)snprintf(train_path, sizeof train_path, "%s/train.yaml", folder);
    (void)snprintf(command, sizeof command, "mkdir -p %s", folder);
    FILE *out = system(command) == 0 ? fopen(train_path, "w") : NULL;
    if (!out) return 1;
    /* invented: one train of 90 pulses */
    fputs("format: pulsewright-train-1\ncontractions:\n  - {frequency_pps: 30, duration_us: 300, current_ma: "
          "40, hold_ms: 3000}\n",
          out);
    fclose(out);
    const struct CMUnitTest tests[] = {cmocka_unit_test(pulses_end_within_the_lease_when_the_host_is_killed),
                                       cmocka_unit_test(a_fresh_host_plays_on_the_same_twin)};
    const int failed = cmocka_run_group_tests(tests, NULL, NULL);
    (void)snprintf(command, sizeof command, "rm -r %s", folder);
    return system(command) != 0 || failed != 0;
}
