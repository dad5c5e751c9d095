/* Twin: the device's own code (wire, stimulator, dose guard) around a virtual muscle of core. On a
 * pseudo-terminal in real time, or stepped on a simulated clock in tests. */
#ifndef PULSEWRIGHT_BRIDGE_TWIN_TWIN_H
#define PULSEWRIGHT_BRIDGE_TWIN_TWIN_H
#include "bridge/link/link.h"
#include "bridge/wire/image.h"
#include "core/document/hookup.h"
#include "core/document/profile.h"
#include "core/document/stimulator.h"
#include "core/status/status.h"
#include <signal.h>

struct twin_options {
    const struct profile *profile;       /* NULL: a resistor, no force */
    const char *muscle;                  /* on channel 1, or: */
    const struct hookup *hookup;         /* NULL: all channels drive `muscle` */
    const struct stimulator *stimulator; /* NULL: the built-in bench stimulator */
    const char *faults_path;             /* NULL: none */
    const char *log_path; /* NULL: none; every pulse given: time_us,channel,duration_us,current_ua */
    uint64_t seed;
};
struct twin;
/* `wire` is the device's end of a link; it outlives the twin. now_us: the clock's value at this reset. */
enum status twin_new(const struct twin_options *options, struct link *wire, uint64_t now_us,
                     struct twin **twin, struct message *why);
bool twin_is_silent(const struct twin *twin); /* not running */
void twin_free(struct twin *twin);
/* Runs all that is due up to now_us (its own clock, which only grows). */
void twin_step(struct twin *twin, uint64_t now_us);
/* When it next has something to do at the latest. */
uint64_t twin_next_us(const struct twin *twin);
/* Runs a twin in real time on a new pseudo-terminal until *stop is set; its clock is CLOCK_MONOTONIC in us.
 * announce is called once with the address "pty:/dev/pts/N". */
enum status twin_run(const struct twin_options *options, void (*announce)(void *context, const char *address),
                     void *context, const volatile sig_atomic_t *stop, struct message *why);
/* A twin in a process of its own on a new pseudo-terminal; address is "pty:/dev/pts/N". Ended by twin_stop
 * (or when its parent is gone). */
enum status twin_start_process(const struct twin_options *options, char address[256], int *process,
                               struct message *why);
void twin_stop_process(int process);

#endif
