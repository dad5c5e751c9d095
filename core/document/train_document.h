/* Train (`pulsewright-train-1`): contractions as a person writes them. */
#ifndef PULSEWRIGHT_CORE_DOCUMENT_TRAIN_DOCUMENT_H
#define PULSEWRIGHT_CORE_DOCUMENT_TRAIN_DOCUMENT_H
#include "core/document/document.h"
#include "core/train/contraction.h"

enum { TRAIN_CONTRACTIONS_MAX = 10000, TRAIN_PULSES_MAX = 1000000 };

struct train {
    size_t contractions;
    struct contraction *contraction;
};

enum status train_parse(const struct document_bytes *bytes, struct train *train, struct message *why);
/* For a muscle whose law this is: a current that its law does not hold at is told at its place. */
enum status train_parse_for(const struct document_bytes *bytes, const struct recruitment *law,
                            struct train *train, struct message *why);
enum status train_load_for(const char *path, const struct recruitment *law, struct train *train,
                           struct message *why);
enum status train_load(const char *path, struct train *train, struct message *why);
void train_print(const struct train *train, struct text_out *out);
void train_free(struct train *train);

#endif
