/* The schemas that one kind of document lends another (a plan holds a stimulator, a demand, contractions).
 * Private to core/document. */
#ifndef PULSEWRIGHT_CORE_DOCUMENT_SCHEMAS_H
#define PULSEWRIGHT_CORE_DOCUMENT_SCHEMAS_H
#include "core/document/schema.h"

extern const struct schema recruitment_schema; /* struct recruitment */
extern const struct schema stimulator_schema;  /* struct stimulator */
extern const struct schema demand_schema;      /* struct demand */
extern const struct schema profile_schema, hookup_schema, train_schema, recordings_schema,
    plan_schema;                          /* docs/documents.md */
extern const struct schema ramp_schema;   /* struct ramp, with its pieces where compiled */
extern const char *const opening_names[]; /* by number of pulses; 0 has no name */
extern const char *const pattern_names[]; /* false singles, true doublets */
extern const char *const ramp_names[];    /* by enum ramp_shape */

#endif
