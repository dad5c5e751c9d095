/* What `plan`, `recount` and `check` print of a plan. Results on stdout; the NOT SIGNED line on stderr. */
#ifndef PULSEWRIGHT_CORE_COMMAND_PLAN_OUTPUT_H
#define PULSEWRIGHT_CORE_COMMAND_PLAN_OUTPUT_H
#include "core/document/plan_document.h"
#include "core/report/json.h"
#include "core/report/option.h"

/* The verdict first, then the blocks, what would work and the notes, in words. */
void plan_output_text(const struct plan *plan);
/* The design's keys of `plan`; seconds NAN: null. */
void plan_output_json(const struct plan *plan, double seconds);
/* The ledger as `figures` (and `shown`) of an open JSON object. */
void plan_output_figures(struct json *json, const struct ledger *ledger);
/* Before the work: -o is needed and, without --replace, neither it nor --picture may exist. */
enum status plan_output_ready(const struct arguments *arguments);
/* Writes the plan to -o (--replace) and, with --picture, the session's picture. */
enum status plan_output_write(const struct arguments *arguments, const struct plan *plan,
                              struct message *why);
/* --today YYYY-MM-DD, else the clock's day: the only place where core's program reads a clock for a date. */
enum status plan_output_today(const struct arguments *arguments, struct date *today);

/* A progress line on a terminal's stderr once a second has passed. Pass &progress as context. */
struct plan_progress {
    double began_s;
    bool terminal, shown;
};
void plan_progress_begin(struct plan_progress *progress);
bool plan_progress_show(void *context, double share, const char *what);
/* Wipes the line; gives the seconds since it began. */
double plan_progress_end(struct plan_progress *progress);

#endif
