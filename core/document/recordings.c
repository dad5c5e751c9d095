/* Recordings documents: what was given and what was measured, in the order it was made. */
#include "core/document/recordings.h"

#include "core/document/fields.h"
#include "core/document/schemas.h"
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

typedef struct recording RE;

static const char *const kinds[] = {"force", "fatigue", "recruitment", "staircase", NULL};
static const char *const uses[] = {"fit", "hold-out", NULL};
static const char *const gains[] = {"fixed", "free", NULL};

/* pulses: {file}, {train} or {column, rising_above, duration_us, current_ma} */
struct pulses_as_written {
    char file[PATH_SIZE], train[PATH_SIZE], column[NAME_SIZE];
    double rising_above, duration_us, current_ma;
};
typedef struct pulses_as_written PW;
static const struct field pulses_fields[] = {
    TEXT(PW, file, "file", "a CSV of pulses"),
    TEXT(PW, train, "train", "a train document"),
    TEXT(PW, column, "column", "the signal's column of triggers"),
    NUMBER(PW, rising_above, "rising_above", -1e9, 1e9, "a pulse where the column rises above this"),
    NUMBER_ABOVE(PW, duration_us, "duration_us", 0, 1000, "phase duration of those pulses, us"),
    NUMBER_ABOVE(PW, current_ma, "current_ma", 0, 262, "current of those pulses, mA"),
    LAST};
static enum status check_pulses(struct reading *reading, const char *path, void *object)
{
    const PW *pulses = object;
    char key[256];
    const int ways = (pulses->file[0] != '\0') + (pulses->train[0] != '\0') + (pulses->column[0] != '\0');
    const int further =
        !isnan(pulses->rising_above) + !isnan(pulses->duration_us) + !isnan(pulses->current_ma);
    if (ways != 1) return schema_fault(reading, path, "may hold one of file, train, column");
    if (further != (pulses->column[0] ? 3 : 0))
        return schema_fault(reading, schema_path(path, "column", key),
                            "goes with rising_above, duration_us and current_ma, all three");
    return STATUS_OK;
}
static const struct schema pulses_schema = {
    .name = "pulses", .size = sizeof(PW), .flow = true, .fields = pulses_fields, .check = check_pulses};

#define SIGNAL(M, KEY, HELP) TEXT_NEEDED(RE, signal.M, KEY, HELP)
static const struct field signal_fields[] = {
    SIGNAL(file, "file", "a CSV or EDF+ file"),
    SIGNAL(time, "time", "name of the time column"),
    SIGNAL(time_unit, "time_unit", "s, ms or us"),
    SIGNAL(value, "value", "name of the force column"),
    SIGNAL(unit, "unit", "N, mN, kgf, lbf, N*m or V"),
    NUMBER(RE, signal.per_volt, "per_volt", -1e6, 1e6, "N a volt, with unit V"),
    LAST};

static bool is_one_of(const char *text, const char *const *words)
{
    for (int i = 0; words[i]; i++)
        if (strcmp(text, words[i]) == 0) return true;
    return false;
}

static enum status check_signal(struct reading *reading, const char *path, void *object)
{
    static const char *const time_units[] = {"s", "ms", "us", NULL};
    static const char *const units[] = {"N", "mN", "kgf", "lbf", "N*m", "V", NULL};
    const RE *recording = object;
    char key[256];
    if (!is_one_of(recording->signal.time_unit, time_units))
        return schema_fault(reading, schema_path(path, "time_unit", key), "holds %s, may hold s | ms | us",
                            recording->signal.time_unit);
    if (!is_one_of(recording->signal.unit, units))
        return schema_fault(reading, schema_path(path, "unit", key),
                            "holds %s, may hold N | mN | kgf | lbf | N*m | V", recording->signal.unit);
    if ((strcmp(recording->signal.unit, "V") == 0) == isnan(recording->signal.per_volt))
        return schema_fault(reading, schema_path(path, "per_volt", key),
                            "goes with unit V, and only with it");
    return STATUS_OK;
}
static const struct schema signal_schema = {
    .name = "a signal", .size = sizeof(RE), .flow = true, .fields = signal_fields, .check = check_signal};

static const struct field length_fields[] = {
    NUMBER(RE, length_relative, "relative", 0.2, 2.5, "length over the best length"),
    TEXT(RE, length_group, "group", "recordings of a group share a length, \"44.5 mm\""), LAST};
static enum status check_length(struct reading *reading, const char *path, void *object)
{
    const RE *recording = object;
    if (isnan(recording->length_relative) != (recording->length_group[0] != '\0'))
        return schema_fault(reading, path, "may hold one of relative, group");
    return STATUS_OK;
}
static const struct schema length_schema = {
    .name = "length", .size = sizeof(RE), .flow = true, .fields = length_fields, .check = check_length};
static bool length_there(const void *object, const struct field *field)
{
    const RE *recording = object;
    (void)field;
    return !isnan(recording->length_relative) || recording->length_group[0] != '\0';
}

/* The pulses stand in the recording as one of three; the table reads them through their own struct. */
struct recording_as_written {
    RE recording;
    PW pulses;
};
typedef struct recording_as_written RW;
#define R(M) recording.M
static const struct field recording_fields[] = {
    CODE_NEEDED(RW, R(name), "name", "a word; files of results carry it"),
    CHOICE_NEEDED(RW, R(kind), "kind", kinds, "what it was made for"),
    MAP_NEEDED(RW, pulses, "pulses", &pulses_schema, "{file: NAME.csv}"),
    {.key = "signal",
     .type = FIELD_MAP,
     .offset = 0,
     .of = &signal_schema,
     .has = NO_OFFSET,
     .required = true,
     .help = "where the force stands"},
    NUMBER(RW, R(rested_ms), "rested_ms", 0, 1e9, "rest before it, ms; absent: fully rested"),
    {.key = "length",
     .type = FIELD_MAP,
     .offset = 0,
     .of = &length_schema,
     .has = NO_OFFSET,
     .there = length_there,
     .help = "{relative: 1.0} or {group: \"44.5 mm\"}"},
    SWITCH(RW, R(gain_free), "gain", gains, "free where an amplifier was changed"),
    SWITCH_NEEDED(RW, R(hold_out), "use", uses, "fit, or kept to be predicted"),
    LAST};

static enum status check_recording(struct reading *reading, const char *path, void *object)
{
    RW *written = object;
    RE *recording = &written->recording;
    (void)reading;
    (void)path;
    recording->pulses_from = written->pulses.file[0]    ? PULSES_FILE
                             : written->pulses.train[0] ? PULSES_TRAIN
                                                        : PULSES_COLUMN;
    memcpy(recording->pulses_file, written->pulses.train[0] ? written->pulses.train : written->pulses.file,
           sizeof recording->pulses_file);
    memcpy(recording->trigger.column, written->pulses.column, sizeof recording->trigger.column);
    recording->trigger.rising_above = written->pulses.rising_above;
    recording->trigger.duration_us = written->pulses.duration_us;
    recording->trigger.current_ma = written->pulses.current_ma;
    return STATUS_OK;
}
static const struct schema recording_schema = {
    .name = "a recording", .size = sizeof(RW), .fields = recording_fields, .check = check_recording};

struct recordings_as_written {
    char muscle[NAME_SIZE];
    size_t recordings;
    RW *recording;
};
typedef struct recordings_as_written RS;
static const struct field recordings_fields[] = {CODE_NEEDED(RS, muscle, "muscle", "a muscle of the profile"),
                                                 LIST_NEEDED(RS, recording, recordings, "recordings",
                                                             &recording_schema, 1, 1000,
                                                             "in the order they were made"),
                                                 LAST};
static enum status check_recordings(struct reading *reading, const char *path, void *object)
{
    const RS *all = object;
    char key[64];
    (void)path;
    for (size_t i = 0; i < all->recordings; i++)
        for (size_t j = 0; j < i; j++) {
            if (strcmp(all->recording[i].recording.name, all->recording[j].recording.name) != 0) continue;
            (void)snprintf(key, sizeof key, "recordings[%zu].name", i);
            return schema_fault(reading, key, "holds %s a second time, each recording may have its own name",
                                all->recording[i].recording.name);
        }
    return STATUS_OK;
}
const struct schema recordings_schema = {
    .name = "recordings", .size = sizeof(RS), .fields = recordings_fields, .check = check_recordings};

enum status recordings_parse(const struct document_bytes *bytes, struct recordings *recordings,
                             struct message *why)
{
    RS written;
    *recordings = (struct recordings){0};
    enum status status =
        schema_parse(&recordings_schema, document_kind_format(DOCUMENT_RECORDINGS), bytes, &written, why);
    if (status != STATUS_OK) return status;
    recordings->recording = calloc(written.recordings, sizeof *recordings->recording);
    if (recordings->recording) {
        memcpy(recordings->muscle, written.muscle, sizeof recordings->muscle);
        recordings->recordings = written.recordings;
        for (size_t i = 0; i < written.recordings; i++)
            recordings->recording[i] = written.recording[i].recording;
    } else {
        status = status_fail(why, STATUS_INTERNAL, "%s: no memory", bytes->path);
    }
    schema_free(&recordings_schema, &written);
    return status;
}

enum status recordings_load(const char *path, struct recordings *recordings, struct message *why)
{
    struct document_bytes bytes;
    enum status status = document_read_bytes(path, &bytes, why);
    if (status != STATUS_OK) return status;
    status = recordings_parse(&bytes, recordings, why);
    document_bytes_free(&bytes);
    return status;
}

void recordings_print(const struct recordings *recordings, struct text_out *out)
{
    RS written = {.recordings = recordings->recordings,
                  .recording = calloc(recordings->recordings + 1, sizeof *written.recording)};
    if (!written.recording) abort(); /* as text_out does */
    memcpy(written.muscle, recordings->muscle, sizeof written.muscle);
    for (size_t i = 0; i < recordings->recordings; i++) {
        const RE *recording = &recordings->recording[i];
        RW *one = &written.recording[i];
        one->recording = *recording;
        one->pulses.rising_above = one->pulses.duration_us = one->pulses.current_ma = ABSENT;
        if (recording->pulses_from == PULSES_COLUMN) {
            memcpy(one->pulses.column, recording->trigger.column, sizeof one->pulses.column);
            one->pulses.rising_above = recording->trigger.rising_above;
            one->pulses.duration_us = recording->trigger.duration_us;
            one->pulses.current_ma = recording->trigger.current_ma;
        } else {
            memcpy(recording->pulses_from == PULSES_TRAIN ? one->pulses.train : one->pulses.file,
                   recording->pulses_file, sizeof one->pulses.file);
        }
    }
    schema_print(&recordings_schema, document_kind_format(DOCUMENT_RECORDINGS), &written, out);
    free(written.recording);
}

void recordings_free(struct recordings *recordings)
{
    free(recordings->recording);
    *recordings = (struct recordings){0};
}
