/* Gate: what may start. Plan -> image, statement, sign-off, uses. The only part that reads the wall clock. */
#ifndef PULSEWRIGHT_BRIDGE_GATE_GATE_H
#define PULSEWRIGHT_BRIDGE_GATE_GATE_H
#include "bridge/gate/keys.h"
#include "bridge/gate/site.h"
#include "bridge/gate/statement.h"
#include "bridge/wire/image.h"
#include "core/document/document.h"
#include "core/document/plan_document.h"
#include "core/status/status.h"

/* Compiles a plan to an image: header, limits, identity and segments sorted by start, sealed. Allocates
 * image->segments: image_free. A value the wire can not carry is refused, never rounded. `unit` overrides the
 * plan's where that is absent (NULL, "": keep). */
enum status image_of_plan(const struct plan *plan, const char *unit, enum signoff_kind kind,
                          struct image *image, struct message *why);
void image_free(struct image *image);
/* What a device by this document says it is. */
struct image_identity image_identity_of(const struct stimulator *stimulator);

/* One ask: may this image start now? */
struct gate_request {
    const struct image *image;
    const uint8_t *plan_digest;    /* of the plan's bytes; NULL: not looked at */
    const char *unit_said;         /* what the device said it is; NULL where none was asked (verify) */
    bool device_is_twin;           /* from its identity */
    bool link_is_real;             /* a serial port */
    bool rehearse;                 /* --rehearse: no sign-off needed; a twin on a pseudo-terminal only */
    const struct signoff *signoff; /* opened and verified; NULL with rehearse */
    const char *person;            /* typed again; NULL: not asked (rehearsal) */
    bool has_record;               /* a record is being written */
    bool resume;                   /* after a stop: counts on `resumes` */
};
/* Every check in one pass at wall-clock time now_s; all reasons that fail are in `why`, joined by "; ". Where
 * it may start and `consume`, the use is written and synced before the answer (counted and written under one
 * lock); then device and person have to be there. Rehearsals are not counted. */
enum status gate_may_start(const struct gate_request *request, const struct site *site, uint64_t now_s,
                           bool consume, struct message *why);
/* Notes that what was started has ended: a stopped image may be resumed within 30 minutes of that, a finished
 * one not. Without it the time of the start counts. Rehearsals are not noted. */
enum status gate_note_end(const struct gate_request *request, const struct site *site, uint64_t now_s,
                          bool finished, struct message *why);
/* The wall clock, s since 1970. */
uint64_t gate_clock_s(void);
/* "signed by S-2 (clinician) for P-017 until 2026-12-02 13:05 UTC", "REHEARSAL, TWIN ONLY" or the NOT SIGNED
 * text. */
void gate_state_text(const struct signoff *signoff, bool rehearse, char *text, size_t size);

#endif
