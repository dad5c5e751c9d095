/* Recordings (`pulsewright-recordings-1`): many recordings of one muscle, in the order they were made. */
#ifndef PULSEWRIGHT_CORE_DOCUMENT_RECORDINGS_H
#define PULSEWRIGHT_CORE_DOCUMENT_RECORDINGS_H
#include "core/document/document.h"

enum recording_kind { RECORDING_FORCE, RECORDING_FATIGUE, RECORDING_RECRUITMENT, RECORDING_STAIRCASE };
enum pulses_from { PULSES_FILE, PULSES_TRAIN, PULSES_COLUMN };

struct recording {
    char name[NAME_SIZE];
    enum recording_kind kind;
    enum pulses_from pulses_from;
    char pulses_file[PATH_SIZE]; /* a CSV or a train; relative to the document */
    struct {
        char column[NAME_SIZE];
        double rising_above, duration_us, current_ma;
    } trigger;
    struct {
        char file[PATH_SIZE];
        char time[NAME_SIZE], value[NAME_SIZE]; /* column names */
        char time_unit[NAME_SIZE];              /* s | ms | us */
        char unit[NAME_SIZE];                   /* N | mN | kgf | lbf | N*m | V */
        double per_volt;                        /* NAN but with V */
    } signal;
    double rested_ms;             /* NAN: fully rested */
    double length_relative;       /* NAN where absent */
    char length_group[NAME_SIZE]; /* "" where absent */
    bool gain_free;
    bool hold_out;
};
struct recordings {
    char muscle[NAME_SIZE];
    size_t recordings;
    struct recording *recording;
};

enum status recordings_parse(const struct document_bytes *bytes, struct recordings *recordings,
                             struct message *why);
enum status recordings_load(const char *path, struct recordings *recordings, struct message *why);
void recordings_print(const struct recordings *recordings, struct text_out *out);
void recordings_free(struct recordings *recordings);

#endif
