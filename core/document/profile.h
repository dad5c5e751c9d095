/* Profile (`pulsewright-profile-1`): a person's muscles, their limits and how sure the numbers are. */
#ifndef PULSEWRIGHT_CORE_DOCUMENT_PROFILE_H
#define PULSEWRIGHT_CORE_DOCUMENT_PROFILE_H
#include "core/document/document.h"
#include "core/dose/limits.h"
#include "core/muscle/parameters.h"

enum { PROFILE_MUSCLES_MAX = 32, UNCERTAINTY_MAX = 32 };

struct uncertainty_entry {
    char key[NAME_SIZE]; /* a parameter's key in the profile, e.g. "A_rest_n_per_ms" */
    double relative_sd;
};

struct profile_muscle {
    char name[NAME_SIZE];
    bool has_measured;
    struct {
        struct date on;
        double joint_deg; /* NAN where absent */
        char electrodes[LINE_SIZE];
        bool as_torque;
        double lever_m; /* NAN where absent */
    } measured;
    struct muscle_parameters parameters;
    double electrode_area_cm2; /* NAN where absent */
    bool has_limits;
    struct person_limits limits;
    char limits_set_by[NAME_SIZE]; /* "" where absent */
    struct date limits_set_on;
    bool has_found;
    struct {
        double duration_us, threshold_ma, comfort_ma;
        bool as_train;
        struct date on;
        char by[NAME_SIZE];
    } found;
    size_t uncertainties;
    struct uncertainty_entry uncertainty[UNCERTAINTY_MAX];
    double *covariance; /* uncertainties x uncertainties, of the logarithms, row by row; NULL where absent.
                           Written by a fit. */
};

struct profile {
    char person[NAME_SIZE];
    size_t muscles;
    struct profile_muscle *muscle;
};

enum status profile_parse(const struct document_bytes *bytes, struct profile *profile, struct message *why);
enum status profile_load(const char *path, struct profile *profile, struct message *why);
void profile_print(const struct profile *profile, struct text_out *out);
void profile_free(struct profile *profile);
/* The muscle of that name; NULL and `why` (which names those there are) where it is not there. name NULL: the
 * only one. */
const struct profile_muscle *profile_muscle(const struct profile *profile, const char *name,
                                            struct message *why);
/* Refuses by name what every command but `fit` needs: force and fatigue blocks. */
enum status profile_muscle_usable(const struct profile_muscle *muscle, struct message *why);

#endif
