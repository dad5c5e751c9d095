/* One streaming, as the command holds it. */
#ifndef PULSEWRIGHT_BRIDGE_COMMAND_STREAM_H
#define PULSEWRIGHT_BRIDGE_COMMAND_STREAM_H
#include "bridge/command/plans.h"
#include "bridge/gate/gate.h"
#include "bridge/host/host.h"
#include "bridge/record/record.h"

struct stream {
    const struct arguments *arguments;
    struct plans plans;
    const struct plan *plan;
    const struct document_bytes *bytes;
    struct image image;
    struct gate_request request;
    struct site *site, *site_memory; /* site: NULL where there is none */
    const char *record_path;
    struct record *record;
    bool record_failed, presses, passed, started, ease_sent, quiet, force_known;
    const char *asked;
    unsigned ease;
    uint32_t first;
    double force_n, peak_n;
    uint64_t progress_us;
    enum status status;
    struct message why;
};
/* What was asked, given and measured, on stdout. */
void stream_summary(const struct stream *stream, const struct host *host);

#endif
