/* Fault schedules: what shall go wrong on the twin's line, and when. CSV: at_ms,direction,action,argument;
 * times from the twin's start. direction: in (from the host), out. action: drop, corrupt, duplicate (the next
 * frame), delay (argument ms, the next frame), cut (the line is dead from then on), stall (nothing moves for
 * argument ms), reset (the device restarts), interlock (opens). Private to bridge/twin. */
#ifndef PULSEWRIGHT_BRIDGE_TWIN_FAULTS_H
#define PULSEWRIGHT_BRIDGE_TWIN_FAULTS_H
#include "core/status/status.h"
#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

enum fault_action {
    FAULT_DROP,
    FAULT_CORRUPT,
    FAULT_DUPLICATE,
    FAULT_DELAY,
    FAULT_CUT,
    FAULT_STALL,
    FAULT_RESET,
    FAULT_INTERLOCK
};
struct fault_entry {
    uint64_t at_us;
    bool out;
    enum fault_action action;
    double argument;
    bool done;
};
struct fault_schedule {
    size_t entries;
    struct fault_entry *entry;
};
enum status fault_schedule_load(const char *path, struct fault_schedule *schedule, struct message *why);
void fault_schedule_free(struct fault_schedule *schedule);
/* The first entry of this direction that is due and not done, of an action in the mask (1 << action); NULL:
 * none. */
struct fault_entry *fault_due(struct fault_schedule *schedule, uint64_t now_us, bool out, unsigned mask);

#endif
