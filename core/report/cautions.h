/* Cautions: the usual precautions that the sheet lists, the signer acknowledges and streaming shows. Not
 * exhaustive. One table. */
#ifndef PULSEWRIGHT_CORE_REPORT_CAUTIONS_H
#define PULSEWRIGHT_CORE_REPORT_CAUTIONS_H
#include <stddef.h>

struct caution {
    const char *id;   /* a word, in the sign-off */
    const char *text; /* a line for a person */
};
extern const struct caution cautions[];
extern const size_t cautions_count;
/* NULL where there is none of that id. */
const struct caution *caution_of(const char *id);
/* Stands above them. */
extern const char *const caution_heading;

#endif
