/* Plans as the commands take them: a plan, a train compiled for a stimulator, or a folder of trains; read
 * once, whole. */
#ifndef PULSEWRIGHT_BRIDGE_COMMAND_PLANS_H
#define PULSEWRIGHT_BRIDGE_COMMAND_PLANS_H
#include "core/document/plan_document.h"
#include "core/report/option.h"

enum { PLANS_MAX = 64 };
struct plans {
    size_t plans;
    struct document_bytes bytes[PLANS_MAX]; /* of the plan: as read, or as printed from a compiled train */
    struct plan plan[PLANS_MAX];
};
/* Adds what `path` holds. A train needs --profile, --stimulator (--muscle, --hookup) among the arguments. */
enum status plans_add(struct plans *plans, const char *path, const struct arguments *arguments,
                      struct message *why);
void plans_free(struct plans *plans);
/* Options that a train needs, for the tables. */
#define PLANS_OPTIONS                                                                                        \
    {"--profile", "P", "for a train: whose muscle"}, {"--muscle", "M", "for a train: which muscle"},         \
        {"--stimulator", "S", "for a train: what it is compiled for"},                                       \
    {                                                                                                        \
        "--hookup", "H", "for a train: on which channel"                                                     \
    }

#endif
