/* Site: who may sign here. The site key signs the whole list of signers, whose serial never falls. The public
 * half and the list stand in a folder that is compiled in, owned by root, and is never read from the
 * environment or an option. */
#ifndef PULSEWRIGHT_BRIDGE_GATE_SITE_H
#define PULSEWRIGHT_BRIDGE_GATE_SITE_H
#include "bridge/gate/keys.h"
#include "core/status/status.h"

/* role, word, may sign for clinical use */
#define ROLE_TABLE(X)                                                                                        \
    X(ROLE_CLINICIAN, "clinician", true)                                                                     \
    X(ROLE_ENGINEER, "engineer", false)                                                                      \
    X(ROLE_STUDY_LEAD, "study-lead", false)                                                                  \
    X(ROLE_REHEARSAL, "rehearsal", false)
enum signer_role {
#define ROLE_ENUM(name, word, clinical) name,
    ROLE_TABLE(ROLE_ENUM)
#undef ROLE_ENUM
};
const char *role_word(enum signer_role role);
bool role_read(const char *word, enum signer_role *role);
bool role_may_sign_clinical(enum signer_role role);

enum { SITE_SIGNERS_MAX = 200, SIGNER_NAME_SIZE = 64 };
struct signer {
    char name[SIGNER_NAME_SIZE]; /* a code */
    enum signer_role role;
    uint8_t public_key[KEY_PUBLIC_SIZE];
    bool withdrawn;
};
struct site {
    char folder[512];
    uint8_t public_key[KEY_PUBLIC_SIZE];
    unsigned long serial;
    size_t signers;
    struct signer signer[SITE_SIGNERS_MAX];
};
const char *site_folder(void); /* the compiled-in one */
/* Reads and verifies site.public and signers of a folder; `strict`: it and its files are owned by root and
 * writable by nobody else. */
enum status site_load(const char *folder, bool strict, struct site *site, struct message *why);
/* The one that is compiled in; strict but in a test build. What signing, verifying and streaming go by. */
enum status site_load_installed(struct site *site, struct message *why);
/* Writes the list anew, signed; its serial is one more than the old one's. */
enum status site_save(struct site *site, const struct secret_key *site_key, struct message *why);
/* A new site: an empty list under this key. Refused where there is one. */
enum status site_begin(const char *folder, const struct secret_key *site_key, struct message *why);
const struct signer *site_signer(const struct site *site, const char *name);

#endif
