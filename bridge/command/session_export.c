/* A session out of the record. The goal of this code: what was given and what was measured come back as
 * recordings, with nothing typed; the plan's own pulses, cut to the device's counters, with those that were
 * lowered as they were. */
#include "bridge/command/session_export.h"
#include "bridge/command/plan_pulses.h"

#include "bridge/record/read.h"
#include "core/document/recordings.h"
#include "core/plan/plan.h"
#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

enum { CHANNELS = 9 };

struct gathering {
    struct record_reader *reader;
    struct record_glance glance; /* the newest or the wanted one */
    uint64_t wanted;
    bool found, anonymous, any_tally;
    struct document_bytes plan; /* copied */
    uint64_t first;             /* segment */
    uint64_t accounted[CHANNELS];
    struct record_pulse_row *told; /* pulses that the device told of one by one */
    size_t tolds;
    struct text_out force, marks;
    bool failed;
};

static bool choose(void *context, const struct record_glance *glance)
{
    struct gathering *all = context;
    if (all->wanted && glance->session != all->wanted) return true;
    all->glance = *glance;
    all->found = true;
    return true;
}

static void take_pulses(struct gathering *all, const struct record_payload *payload)
{
    const size_t rows = payload->size / RECORD_PULSE_OCTETS;
    struct record_pulse_row *grown = realloc(all->told, (all->tolds + rows + 1) * sizeof *grown);
    if (!grown) {
        all->failed = true;
        return;
    }
    all->told = grown;
    for (size_t i = 0; i < rows; i++)
        record_pulse_decode(payload->data + i * RECORD_PULSE_OCTETS, &all->told[all->tolds++]);
}

static void take_force(struct gathering *all, const struct record_payload *payload)
{
    for (size_t at = 0; at + RECORD_FORCE_OCTETS <= payload->size; at += RECORD_FORCE_OCTETS) {
        struct record_force_row row;
        record_force_decode(payload->data + at, &row);
        text_out_print(&all->force, "%.17g,%.17g\n", (double)row.at_us / 1e3, row.force_n);
    }
}

static void take_mark(struct gathering *all, const struct record_payload *payload)
{
    char mark[64] = "", words[256] = "";
    record_text(all->reader, payload, "mark", mark, sizeof mark);
    if (!all->anonymous) record_text(all->reader, payload, "text", words, sizeof words);
    for (char *c = words; *c; c++)
        if (*c == '"') *c = '\'';
    text_out_print(&all->marks, "%.17g,%s,\"%s\"\n", (double)payload->entry->at_us / 1e3, mark, words);
}

static bool gather(void *context, const struct record_payload *payload)
{
    struct gathering *all = context;
    if (!payload->data) return true;
    switch (payload->entry->kind) {
    case RECORD_PLAN:
        all->plan.data = malloc(payload->size + 1);
        if (!all->plan.data) return false;
        memcpy(all->plan.data, payload->data, payload->size);
        all->plan.data[payload->size] = '\0';
        all->plan.size = payload->size;
        break;
    case RECORD_START:
    case RECORD_RESUME: all->first = (uint64_t)record_number(all->reader, payload, "first", 1); break;
    case RECORD_TALLY: {
        const double channel = record_number(all->reader, payload, "channel", 0);
        const double given = record_number(all->reader, payload, "pulses", 0) +
                             record_number(all->reader, payload, "skipped", 0);
        if (channel >= 1 && channel < CHANNELS) all->accounted[(unsigned)channel] = (uint64_t)given;
        all->any_tally = true;
        break;
    }
    case RECORD_PULSES: take_pulses(all, payload); break;
    case RECORD_FORCE: take_force(all, payload); break;
    case RECORD_MARK: take_mark(all, payload); break;
    default: break;
    }
    return !all->failed;
}

/* The pulse that the device told of at this moment on this channel; NULL: as planned. */
static const struct record_pulse_row *told_at(const struct gathering *all, double time_ms, unsigned channel)
{
    const uint64_t at_us = (uint64_t)llround(time_ms * 1e3);
    for (size_t i = 0; i < all->tolds; i++)
        if (all->told[i].at_us == at_us && all->told[i].channel == channel) return &all->told[i];
    return NULL;
}

/* Planned pulses from the first segment on, as many a channel as the device counted; lowered ones as they
 * were. */
static void cut_to_given(const struct gathering *all, struct pulses_table *table, double from_ms)
{
    uint64_t seen[CHANNELS] = {0};
    size_t kept = 0;
    for (size_t i = 0; i < table->pulses; i++) {
        const unsigned channel = table->channel[i];
        if (table->pulse[i].time_ms < from_ms || channel >= CHANNELS) continue;
        if (seen[channel]++ >= all->accounted[channel]) continue;
        struct train_pulse pulse = table->pulse[i];
        const struct record_pulse_row *told = told_at(all, pulse.time_ms, channel);
        if (told) pulse.current_ma = told->current_ua / 1e3;
        table->pulse[kept] = pulse;
        table->channel[kept++] = channel;
    }
    table->pulses = kept;
}

static enum status start_of_segment(const struct plan *plan, uint64_t index, double *start_ms,
                                    struct message *why)
{
    struct segment *segments = NULL;
    size_t count = 0;
    const enum status status = plan_segments(plan, &segments, &count, why);
    if (status == STATUS_OK && index >= 1 && index <= count)
        *start_ms = (double)segments[index - 1].start_us / 1e3;
    free(segments);
    return status;
}

static enum status write_text(const struct session_export *wanted, const char *name,
                              const struct text_out *out, struct message *why)
{
    char path[PATH_SIZE];
    (void)snprintf(path, sizeof path, "%.1000s/%s", wanted->folder, name);
    const enum status status =
        document_write_file(path, out->data ? out->data : "", out->size, wanted->replace, why);
    if (status == STATUS_OK) printf("%s\n", path);
    return status;
}

static enum status write_recordings(const struct session_export *wanted, const struct plan *plan,
                                    uint64_t session, struct message *why)
{
    struct recording recording = {.kind = RECORDING_FORCE,
                                  .pulses_from = PULSES_FILE,
                                  .rested_ms = (double)NAN,
                                  .length_relative = (double)NAN};
    struct recordings recordings = {.recordings = 1, .recording = &recording};
    struct text_out out = {0};
    (void)snprintf(recordings.muscle, sizeof recordings.muscle, "%s", plan->channel[0].muscle);
    (void)snprintf(recording.name, sizeof recording.name, "session-%llu", (unsigned long long)session);
    (void)snprintf(recording.pulses_file, sizeof recording.pulses_file, "pulses.csv");
    (void)snprintf(recording.signal.file, sizeof recording.signal.file, "force.csv");
    (void)snprintf(recording.signal.time, sizeof recording.signal.time, "time_ms");
    (void)snprintf(recording.signal.time_unit, sizeof recording.signal.time_unit, "ms");
    (void)snprintf(recording.signal.value, sizeof recording.signal.value, "force_n");
    (void)snprintf(recording.signal.unit, sizeof recording.signal.unit, "N");
    recording.signal.per_volt = (double)NAN;
    recordings_print(&recordings, &out);
    const enum status status = write_text(wanted, "recordings.yaml", &out, why);
    text_out_free(&out);
    return status;
}

static enum status write_all(const struct session_export *wanted, struct gathering *all, struct message *why)
{
    struct plan plan;
    struct pulses_table table;
    struct text_out pulses = {0};
    if (!all->plan.data)
        return status_fail(why, STATUS_REFUSED, "session %llu holds no plan any more",
                           (unsigned long long)all->glance.session);
    (void)snprintf(all->plan.path, sizeof all->plan.path, "%.1000s", wanted->path);
    enum status status = plan_parse(&all->plan, &plan, why);
    if (status != STATUS_OK) return status;
    status = export_plan_pulses(&plan, &table, why);
    if (status == STATUS_OK) {
        double from_ms = 0;
        status = start_of_segment(&plan, all->first, &from_ms, why);
        if (status == STATUS_OK) status = export_sort(&table, why);
        if (status == STATUS_OK && all->any_tally) cut_to_given(all, &table, from_ms);
        if (status == STATUS_OK) {
            pulses_print(&table, all->glance.approval, &pulses);
            status = write_text(wanted, "pulses.csv", &pulses, why);
        }
        pulses_free(&table);
        text_out_free(&pulses);
    }
    if (status == STATUS_OK) status = write_text(wanted, "force.csv", &all->force, why);
    if (status == STATUS_OK) status = write_text(wanted, "marks.csv", &all->marks, why);
    if (status == STATUS_OK) status = write_recordings(wanted, &plan, all->glance.session, why);
    plan_free(&plan);
    if (status == STATUS_OK) {
        printf(
            "session %llu%s%s, %s%s\n", (unsigned long long)all->glance.session,
            wanted->anonymous ? "" : " of ", wanted->anonymous ? "" : all->glance.person, all->glance.ended,
            all->any_tally ? ""
                           : "; how many pulses were given is not known: all that were planned are listed");
        fprintf(stderr, "%s\n", all->glance.approval);
    }
    return status;
}

enum status session_export_write(const struct session_export *wanted, struct message *why)
{
    struct gathering *all = calloc(1, sizeof *all);
    if (!all) return status_fail(why, STATUS_INTERNAL, "no memory");
    all->wanted = wanted->session;
    all->anonymous = wanted->anonymous;
    all->first = 1;
    text_out_print(&all->force, "time_ms,force_n\n");
    text_out_print(&all->marks, "time_ms,mark,text\n");
    enum status status = record_open(wanted->path, &all->reader, why);
    if (status == STATUS_OK) {
        status = record_sessions(all->reader, choose, all, why);
        if (status == STATUS_OK && !all->found)
            status = status_fail(why, STATUS_USAGE, "%s holds no such session", wanted->path);
        if (status == STATUS_OK) status = record_walk(all->reader, all->glance.session, gather, all, why);
        if (status == STATUS_OK && all->failed) status = status_fail(why, STATUS_INTERNAL, "no memory");
        if (status == STATUS_OK) status = write_all(wanted, all, why);
        record_close(all->reader);
    }
    document_bytes_free(&all->plan);
    text_out_free(&all->force);
    text_out_free(&all->marks);
    free(all->told);
    free(all);
    return status;
}
