/* What a twin is made of, from a command's arguments. */
#ifndef PULSEWRIGHT_BRIDGE_COMMAND_TWIN_OPTIONS_H
#define PULSEWRIGHT_BRIDGE_COMMAND_TWIN_OPTIONS_H
#include "bridge/twin/twin.h"
#include "core/report/option.h"

struct twin_documents {
    struct profile profile;
    struct hookup hookup;
    struct stimulator stimulator;
    struct twin_options options;
};
/* Reads --profile, --muscle, --hookup, --stimulator, --faults, --log. Free with twin_documents_free. */
enum status twin_documents_read(const struct arguments *arguments, struct twin_documents *documents,
                                struct message *why);
void twin_documents_free(struct twin_documents *documents);

#endif
