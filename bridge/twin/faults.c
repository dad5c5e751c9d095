/* Fault schedules from a file. The goal of this code: what goes wrong is written down beforehand, so that it
 * can be tried again. */
#include "bridge/twin/faults.h"

#include "core/document/table.h"
#include <stdlib.h>
#include <string.h>

static const char *const actions[] = {"drop",  "corrupt", "duplicate", "delay", "cut",
                                      "stall", "reset",   "interlock", NULL};

static enum status read_row(const struct table *table, const char *path, size_t row,
                            struct fault_entry *entry, struct message *why)
{
    static const char *const names[] = {"at_ms", "direction", "action", "argument"};
    size_t column[4];
    for (int i = 0; i < 4; i++) {
        const long found = table_column(table, names[i]);
        if (found < 0)
            return status_fail(why, STATUS_DOCUMENT, "%s:1:1: %s: is no column here, the header may hold it",
                               path, names[i]);
        column[i] = (size_t)found;
    }
    double at_ms = 0;
    enum status status = table_number(table, path, row, column[0], 0, 1e9, &at_ms, why);
    if (status != STATUS_OK) return status;
    const char *direction = table->cell[row * table->columns + column[1]],
               *action = table->cell[row * table->columns + column[2]];
    if (strcmp(direction, "in") != 0 && strcmp(direction, "out") != 0)
        return status_fail(why, STATUS_DOCUMENT, "%s:%zu:%zu: direction: holds %.40s, may hold in | out",
                           path, table->line[row], column[1] + 1, direction);
    int which = 0;
    while (actions[which] && strcmp(actions[which], action) != 0) which++;
    if (!actions[which])
        return status_fail(why, STATUS_DOCUMENT,
                           "%s:%zu:%zu: action: holds %.40s, may hold drop | corrupt | duplicate | delay | "
                           "cut | stall | reset | interlock",
                           path, table->line[row], column[2] + 1, action);
    if (table->cell[row * table->columns + column[3]][0])
        status = table_number(table, path, row, column[3], 0, 1e9, &entry->argument, why);
    entry->at_us = (uint64_t)(at_ms * 1e3);
    entry->out = strcmp(direction, "out") == 0;
    entry->action = (enum fault_action)which;
    return status;
}

enum status fault_schedule_load(const char *path, struct fault_schedule *schedule, struct message *why)
{
    struct document_bytes bytes;
    struct table table;
    *schedule = (struct fault_schedule){0};
    enum status status = document_read_bytes(path, &bytes, why);
    if (status != STATUS_OK) return status;
    status = table_parse(&bytes, &table, why);
    if (status == STATUS_OK) {
        schedule->entry = calloc(table.rows + 1, sizeof *schedule->entry);
        if (!schedule->entry) status = status_fail(why, STATUS_INTERNAL, "%s: no memory", path);
        for (size_t row = 0; status == STATUS_OK && row < table.rows; row++) {
            status = read_row(&table, path, row, &schedule->entry[row], why);
            schedule->entries = row + 1;
        }
        table_free(&table);
    }
    document_bytes_free(&bytes);
    if (status != STATUS_OK) fault_schedule_free(schedule);
    return status;
}

void fault_schedule_free(struct fault_schedule *schedule)
{
    free(schedule->entry);
    *schedule = (struct fault_schedule){0};
}

struct fault_entry *fault_due(struct fault_schedule *schedule, uint64_t now_us, bool out, unsigned mask)
{
    for (size_t i = 0; i < schedule->entries; i++) {
        struct fault_entry *entry = &schedule->entry[i];
        if (!entry->done && entry->out == out && entry->at_us <= now_us && (mask & 1u << entry->action))
            return entry;
    }
    return NULL;
}
