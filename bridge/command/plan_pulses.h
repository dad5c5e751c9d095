/* A plan's pulses as a table, for exports. */
#ifndef PULSEWRIGHT_BRIDGE_COMMAND_PLAN_PULSES_H
#define PULSEWRIGHT_BRIDGE_COMMAND_PLAN_PULSES_H
#include "core/document/plan_document.h"
#include "core/document/table.h"

/* All pulses with their channels. Free with pulses_free. */
enum status export_plan_pulses(const struct plan *plan, struct pulses_table *table, struct message *why);
/* By time, then by channel. */
enum status export_sort(struct pulses_table *table, struct message *why);

#endif
