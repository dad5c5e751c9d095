/* Gate: what may start. The only place that reads the wall clock. Statement, sign-off, signers and uses. */
#ifndef PULSEWRIGHT_BRIDGE_GATE_GATE_H
#define PULSEWRIGHT_BRIDGE_GATE_GATE_H
#include "bridge/wire/image.h"
#include "core/document/plan_document.h"
#include "core/status/status.h"

/* Compiles a plan to an image: header, limits, identity and segments sorted by start, sealed. Allocates image->segments: image_free.
 * A value the wire can not carry is refused, never rounded. `unit` overrides the plan's where that is absent ("" : keep). */
enum status image_of_plan(const struct plan *plan, const char *unit, enum signoff_kind kind, struct image *image, struct message *why);
void image_free(struct image *image);

/* What was approved, opened and verified once; plain data. */
enum { GATE_IMAGES_MAX = 64, GATE_CAUTIONS_MAX = 64, GATE_ID_SIZE = 16 };
struct signoff {
    enum signoff_kind kind;
    size_t images;
    struct {
        uint8_t root[IMAGE_ROOT_SIZE];
        uint32_t starts;
    } image[GATE_IMAGES_MAX];
    uint32_t starts_in_all, sessions, resumes;
    uint64_t created_s, not_before_s, expires_s;
    uint8_t id[GATE_ID_SIZE];
    char person[64], unit[IMAGE_NAME_SIZE], signer[64], role[32];
    uint8_t key_id[16];
    size_t cautions;
    char caution[GATE_CAUTIONS_MAX][32]; /* ids acknowledged */
    uint64_t pulses[IMAGE_CHANNELS_MAX], charge_pc[IMAGE_CHANNELS_MAX];
};

/* One ask: may this image start now? */
struct gate_request {
    const struct image *image;
    const struct image_identity *unit; /* what the device said it is; NULL in `verify` */
    bool device_is_twin, link_is_real; /* from identity and transport */
    bool rehearse;                     /* --rehearse: no sign-off needed; twin on a pseudo-terminal only */
    const char *signoff_path;          /* NULL with rehearse */
    const char *person;                /* typed again; NULL with rehearse */
    bool resume;                       /* after a stop: counts on `resumes` */
};
/* Every check in one pass; all reasons that fail are in `why`, one a line. On STATUS_OK with `consume` the use is written and synced. */
enum status gate_may_start(const struct gate_request *request, bool consume, struct signoff *signoff, struct message *why);
/* "signed by S-2 (clinician) until 2026-12-02 13:05" or the NOT SIGNED text. */
void gate_state_text(const struct signoff *signoff, bool rehearse, char *text, size_t size);
#define GATE_NOT_SIGNED "NOT SIGNED: no clinician has approved these pulses. Not for use on a person."

#endif
