/* Load, save, load is identity: every sample document of the project, and values to the last bit. */
#include "core/document/demand.h"
#include "core/document/hookup.h"
#include "core/document/plan_document.h"
#include "core/document/profile.h"
#include "core/document/recordings.h"
#include "core/document/stimulator.h"
#include "core/document/train_document.h"
#include "support/near.h"

#include <glob.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

/* Reads, writes, frees: one row a kind. */
#define ROUND(kind)                                                                                          \
    static enum status round_##kind(const struct document_bytes *bytes, struct text_out *out,                \
                                    struct message *why)                                                     \
    {                                                                                                        \
        struct kind document;                                                                                \
        const enum status status = kind##_parse(bytes, &document, why);                                      \
        if (status != STATUS_OK) return status;                                                              \
        kind##_print(&document, out);                                                                        \
        free_##kind(&document);                                                                              \
        return STATUS_OK;                                                                                    \
    }
static void free_profile(struct profile *d)
{
    profile_free(d);
}
static void free_demand(struct demand *d)
{
    demand_free(d);
}
static void free_stimulator(struct stimulator *d)
{
    (void)d;
}
static void free_hookup(struct hookup *d)
{
    (void)d;
}
static void free_train(struct train *d)
{
    train_free(d);
}
static void free_recordings(struct recordings *d)
{
    recordings_free(d);
}
static void free_plan(struct plan *d)
{
    plan_free(d);
}
ROUND(profile)
ROUND(demand)
ROUND(stimulator)
ROUND(hookup)
ROUND(train)
ROUND(recordings)
ROUND(plan)

static enum status (*const rounds[DOCUMENT_KINDS])(const struct document_bytes *, struct text_out *,
                                                   struct message *) = {
    round_profile, round_demand, round_stimulator, round_hookup, round_train, round_recordings, round_plan};

static void check_round(const struct document_bytes *bytes)
{
    struct message why = {""};
    enum document_kind kind = DOCUMENT_KINDS;
    assert_status(document_kind_of(bytes, &kind, &why), STATUS_OK, &why);
    struct text_out first = {0}, second = {0};
    assert_status(rounds[kind](bytes, &first, &why), STATUS_OK, &why);
    struct document_bytes again = {.data = first.data, .size = first.size};
    (void)snprintf(again.path, sizeof again.path, "written");
    assert_status(rounds[kind](&again, &second, &why), STATUS_OK, &why);
    assert_string_equal(first.data, second.data);
    text_out_free(&first);
    text_out_free(&second);
}

static void every_sample_reads_back_as_it_was_written(void **state)
{
    (void)state;
    glob_t found;
    assert_int_equal(glob(PULSEWRIGHT_SOURCE "/profiles/*/*.yaml", 0, NULL, &found), 0);
    assert_true(found.gl_pathc >= 12);
    for (size_t i = 0; i < found.gl_pathc; i++) {
        struct document_bytes bytes;
        struct message why = {""};
        assert_status(document_read_bytes(found.gl_pathv[i], &bytes, &why), STATUS_OK, &why);
        print_message("%s\n", found.gl_pathv[i]);
        check_round(&bytes);
        document_bytes_free(&bytes);
    }
    globfree(&found);
}

static void numbers_keep_their_last_bit(void **state)
{
    (void)state;
    static const double awkward[] = {0.1,    1.0 / 3, 2.2250738585072014e-308, 123456789.12345678,
                                     4.0e-7, 1e300};
    for (size_t i = 0; i < sizeof awkward / sizeof awkward[0]; i++) {
        char text[32];
        const double back = strtod(number_text(awkward[i], text), NULL);
        assert_memory_equal(&back, &awkward[i], sizeof back);
    }
}

/* A profile with a covariance and awkward numbers, a plan's parts are covered by the planner's own tests. */
static void a_fitted_profile_keeps_its_covariance(void **state)
{
    (void)state;
    static const char text[] =
        "format: pulsewright-profile-1\nperson: P-9\nmuscles:\n  - name: m\n    recruitment: {law: full}\n"
        "    uncertainty: {Km_rest: 0.1, tau1_rest_ms: 0.33333333333333331}\n"
        "    covariance: [[0.01, -0.0012345678901234567], [-0.0012345678901234567, 0.1]]\n";
    struct document_bytes bytes = {.path = "p.yaml", .size = sizeof text - 1};
    char copy[sizeof text];
    memcpy(copy, text, sizeof text);
    bytes.data = copy;
    check_round(&bytes);
    struct profile profile;
    struct message why;
    assert_status(profile_parse(&bytes, &profile, &why), STATUS_OK, &why);
    assert_near(profile.muscle[0].covariance[1], -0.0012345678901234567, 0, 0);
    assert_false(profile.muscle[0].parameters.has_force);
    assert_int_equal(profile_muscle_usable(&profile.muscle[0], &why), STATUS_DOCUMENT);
    profile_free(&profile);
}

int main(void)
{
    const struct CMUnitTest tests[] = {cmocka_unit_test(every_sample_reads_back_as_it_was_written),
                                       cmocka_unit_test(numbers_keep_their_last_bit),
                                       cmocka_unit_test(a_fitted_profile_keeps_its_covariance)};
    return cmocka_run_group_tests(tests, NULL, NULL) != 0;
}
