/* A recorded session as files. */
#ifndef PULSEWRIGHT_BRIDGE_COMMAND_SESSION_EXPORT_H
#define PULSEWRIGHT_BRIDGE_COMMAND_SESSION_EXPORT_H
#include "core/document/plan_document.h"
#include "core/document/table.h"
#include "core/status/status.h"

struct session_export {
    const char *path, *folder;
    uint64_t session; /* 0: the newest */
    bool anonymous, replace;
};
/* Writes pulses.csv, force.csv, marks.csv and recordings.yaml; names them on stdout. */
enum status session_export_write(const struct session_export *wanted, struct message *why);

/* export.c: all pulses of a plan with their channels; by time. */
enum status export_plan_pulses(const struct plan *plan, struct pulses_table *table, struct message *why);
enum status export_sort(struct pulses_table *table, struct message *why);

#endif
