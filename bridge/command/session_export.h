/* A recorded session as files. */
#ifndef PULSEWRIGHT_BRIDGE_COMMAND_SESSION_EXPORT_H
#define PULSEWRIGHT_BRIDGE_COMMAND_SESSION_EXPORT_H
#include "core/status/status.h"
#include <stdbool.h>
#include <stdint.h>

struct session_export {
    const char *path, *folder;
    uint64_t session; /* 0: the newest */
    bool anonymous, replace;
};
/* Writes pulses.csv, force.csv, marks.csv and recordings.yaml; names them on stdout. */
enum status session_export_write(const struct session_export *wanted, struct message *why);

#endif
