/* Hookup (`pulsewright-hookup-1`): which channel drives what. Keys: person, channels: [{channel, muscle,
 * side, pad_cm2, return_pad_cm2}]. */
#ifndef PULSEWRIGHT_CORE_DOCUMENT_HOOKUP_H
#define PULSEWRIGHT_CORE_DOCUMENT_HOOKUP_H
#include "core/document/document.h"
#include "core/document/stimulator.h"

struct hookup_channel {
    unsigned channel; /* 1 .. */
    char muscle[NAME_SIZE];
    char side[NAME_SIZE];           /* left | right | "" */
    double pad_cm2, return_pad_cm2; /* NAN where absent */
};
struct hookup {
    char person[NAME_SIZE];
    size_t channels;
    struct hookup_channel channel[STIMULATOR_CHANNELS_MAX];
};

enum status hookup_parse(const struct document_bytes *bytes, struct hookup *hookup, struct message *why);
enum status hookup_load(const char *path, struct hookup *hookup, struct message *why);
void hookup_print(const struct hookup *hookup, struct text_out *out);

#endif
