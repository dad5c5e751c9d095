/* What predict, curves and pulses take from the command line: a muscle of a
 * profile, and pulses for it from a file or a train. */
#ifndef PULSEWRIGHT_CORE_COMMAND_MUSCLE_INPUT_H
#define PULSEWRIGHT_CORE_COMMAND_MUSCLE_INPUT_H
#include "core/document/document.h"
#include "core/document/hookup.h"
#include "core/document/profile.h"
#include "core/document/table.h"
#include "core/document/train_document.h"
#include "core/report/option.h"

struct muscle_input {
    struct profile profile;
    const struct profile_muscle *muscle; /* in the profile */
    struct train_pulse *pulses;
    bool *same_period; /* NULL for a pulse file */
    size_t count;
    double hold_ms[2]; /* the first contraction's hold; NAN where there is none */
    struct motion motion;
    bool has_motion;
    unsigned channel; /* of the muscle in --hookup; 1 without */
};

/* The profile and its muscle only (`profile_path`, --muscle). */
enum status muscle_input_muscle(const struct arguments *arguments, const char *profile_path,
                                struct muscle_input *input, struct message *why);
/* Everything `predict` takes: positional profile, --muscle, --pulses or
 * --train, --stimulator, --hookup, --motion. */
enum status muscle_input_load(const struct arguments *arguments, struct muscle_input *input,
                              struct message *why);
/* The train at `path` compiled for input->muscle (--stimulator, --hookup). */
enum status muscle_input_train(const struct arguments *arguments, const char *path,
                               struct muscle_input *input, struct message *why);
/* Always after a load, also one that failed. */
void muscle_input_free(struct muscle_input *input);

#endif
