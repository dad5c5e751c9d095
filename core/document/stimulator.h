/* Stimulator (`pulsewright-stimulator-1`): what a device can give, in its own steps. Also the `stimulator:`
 * part of a plan. */
#ifndef PULSEWRIGHT_CORE_DOCUMENT_STIMULATOR_H
#define PULSEWRIGHT_CORE_DOCUMENT_STIMULATOR_H
#include "core/document/document.h"
#include "core/dose/limits.h"
#include "core/train/segment.h"

enum { STIMULATOR_CHANNELS_MAX = 8, STIMULATOR_RETURNS_MAX = 8 };

struct stepped {
    double from, to, step;
};

struct stimulator {
    char name[NAME_SIZE];
    char unit[NAME_SIZE]; /* "" where absent: asked at signing */
    unsigned channels;
    struct stepped current_ma, duration_us, frequency_pps;
    double gap_us_min;
    bool capacitor_balanced;
    double recovery_us; /* capacitor-balanced only, else NAN */
    double interphase_us;
    double mismatch_percent;
    size_t returns; /* groups of channels that share a return electrode */
    struct {
        size_t channels;
        unsigned channel[STIMULATOR_CHANNELS_MAX];
    } return_group[STIMULATOR_RETURNS_MAX];
    bool independent; /* overlap: independent; else one-at-a-time */
    unsigned queue_segments;
    double compliance_v, load_ohm;
    unsigned baud;
};

enum status stimulator_parse(const struct document_bytes *bytes, struct stimulator *stimulator,
                             struct message *why);
enum status stimulator_load(const char *path, struct stimulator *stimulator, struct message *why);
void stimulator_print(const struct stimulator *stimulator, struct text_out *out);
struct train_grid stimulator_grid(const struct stimulator *stimulator);
struct dose_device stimulator_dose_device(const struct stimulator *stimulator);

#endif
