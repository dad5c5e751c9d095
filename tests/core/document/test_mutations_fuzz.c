/* Mutated sample documents and tables: whatever the octets are, a reader answers OK or a bad document, owns
 * nothing after a failure (the sanitizers watch), and an OK never lets a NaN through where a value is needed.
 * Seed stated: 20261201. */
#include "core/document/demand.h"
#include "core/document/hookup.h"
#include "core/document/profile.h"
#include "core/document/recordings.h"
#include "core/document/stimulator.h"
#include "core/document/table.h"
#include "core/document/train_document.h"
#include "support/near.h"

#include <glob.h>
#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

enum { ROUNDS = 200, EDITS_MAX = 6 };

/* xorshift64* (Vigna 2016), from memory: only that it is repeatable matters here. */
static uint64_t state_now = 20261201;
static size_t draw(size_t below)
{
    state_now ^= state_now >> 12;
    state_now ^= state_now << 25;
    state_now ^= state_now >> 27;
    return (size_t)((state_now * 2685821657736338717ULL) >> 33) % below;
}

static void mutate(struct document_bytes *bytes)
{
    static const char *const words[] = {"nan", ".inf", "1e999", "-",  ": ",  "\n",          "{",  "}", "[",
                                        "]",   "\"",   "&a ",   "*a", "0x1", "99999999999", "\t", "#"};
    for (size_t edits = 1 + draw(EDITS_MAX); edits > 0 && bytes->size > 1; edits--) {
        const size_t at = draw(bytes->size);
        const char *word = words[draw(sizeof words / sizeof words[0])];
        const size_t length = strlen(word);
        if (draw(3) == 0) {
            bytes->data[at] = (char)draw(256);
        } else if (draw(2) == 0 && at + length < bytes->size) {
            memcpy(bytes->data + at, word, length);
        } else {
            memmove(bytes->data + at, bytes->data + at + 1, bytes->size - at); /* the NUL moves along */
            bytes->size--;
        }
    }
}

static int accepted, refused;
static void note(enum status status)
{
    assert_true(status == STATUS_OK || status == STATUS_DOCUMENT);
    accepted += status == STATUS_OK ? 1 : 0;
    refused += status == STATUS_OK ? 0 : 1;
}

static void read_profile(const struct document_bytes *bytes, struct message *why)
{
    struct profile profile;
    const enum status status = profile_parse(bytes, &profile, why);
    note(status);
    if (status != STATUS_OK) return;
    for (size_t i = 0; i < profile.muscles; i++) {
        const struct muscle_parameters *p = &profile.muscle[i].parameters;
        if (p->has_force)
            assert_true(isfinite(p->A_rest_n_per_ms) && isfinite(p->Km_rest) && isfinite(p->tau1_rest_ms) &&
                        isfinite(p->tau2_ms) && isfinite(p->tau_c_ms) &&
                        isfinite(p->R0) != isfinite(p->R0_above_Km));
        if (p->has_fatigue) assert_true(isfinite(p->alpha_A_per_ms2) && isfinite(p->tau_fat_ms));
        assert_true(p->tiers >= 1 && p->tiers <= MUSCLE_TIERS_MAX && isfinite(p->tone_n) &&
                    isfinite(p->delay_ms));
    }
    profile_free(&profile);
}

static void read_any(enum document_kind kind, const struct document_bytes *bytes, struct message *why)
{
    struct demand demand;
    struct stimulator stimulator;
    struct hookup hookup;
    struct train train;
    enum status status = STATUS_OK;
    switch (kind) {
    case DOCUMENT_PROFILE: read_profile(bytes, why); break;
    case DOCUMENT_DEMAND:
        note(status = demand_parse(bytes, &demand, why));
        if (status != STATUS_OK) break;
        assert_true(isfinite(demand.target) && isfinite(demand.hold_ms) && isfinite(demand.rest_ms));
        demand_free(&demand);
        break;
    case DOCUMENT_STIMULATOR:
        note(status = stimulator_parse(bytes, &stimulator, why));
        if (status != STATUS_OK) break;
        assert_true(isfinite(stimulator.current_ma.to) && isfinite(stimulator.gap_us_min));
        break;
    case DOCUMENT_HOOKUP: note(hookup_parse(bytes, &hookup, why)); break;
    case DOCUMENT_TRAIN:
        note(status = train_parse(bytes, &train, why));
        if (status != STATUS_OK) break;
        for (size_t i = 0; i < train.contractions; i++)
            assert_true(isfinite(train.contraction[i].current_ma) &&
                        isfinite(train.contraction[i].duration_us));
        train_free(&train);
        break;
    default: break;
    }
}

static void mutated_documents_are_read_or_refused(void **state)
{
    (void)state;
    glob_t found;
    assert_int_equal(glob(PULSEWRIGHT_SOURCE "/profiles/[!r]*/*.yaml", 0, NULL, &found), 0);
    for (size_t i = 0; i < found.gl_pathc; i++) {
        struct document_bytes original;
        struct message why = {.text = ""};
        enum document_kind kind = DOCUMENT_KINDS;
        assert_status(document_read_bytes(found.gl_pathv[i], &original, &why), STATUS_OK, &why);
        assert_status(document_kind_of(&original, &kind, &why), STATUS_OK, &why);
        for (int round = 0; round < ROUNDS; round++) {
            struct document_bytes bytes = original;
            bytes.data = malloc(original.size + 1);
            assert_non_null(bytes.data);
            memcpy(bytes.data, original.data, original.size + 1);
            mutate(&bytes);
            read_any(kind, &bytes, &why);
            free(bytes.data);
        }
        document_bytes_free(&original);
    }
    globfree(&found);
    print_message("%d accepted, %d refused\n", accepted, refused);
    assert_true(accepted > 0 && refused > accepted);
}

static void mutated_tables_are_read_or_refused(void **state)
{
    (void)state;
    static const char text[] =
        "time_ms,duration_us,current_ma,channel,muscle\r\n0,300,60,1,\"quadriceps\"\r\n"
        "33.3,300,60,1,a\r\n66.6,300,60,1,b\r\n70,250,40,2,\"c \"\"d\"\"\"\r\n";
    for (int round = 0; round < 3000; round++) {
        struct message why = {.text = ""};
        struct document_bytes bytes = {.path = "p.csv", .data = malloc(sizeof text), .size = sizeof text - 1};
        assert_non_null(bytes.data);
        memcpy(bytes.data, text, sizeof text);
        mutate(&bytes);
        struct pulses_table table;
        const enum status status = pulses_parse(&bytes, &table, &why);
        note(status);
        for (size_t i = 0; status == STATUS_OK && i < table.pulses; i++)
            assert_true(isfinite(table.pulse[i].time_ms) && table.pulse[i].duration_us >= 0 &&
                        table.pulse[i].current_ma >= 0);
        if (status == STATUS_OK) pulses_free(&table);
        free(bytes.data);
    }
}

int main(void)
{
    const struct CMUnitTest tests[] = {cmocka_unit_test(mutated_documents_are_read_or_refused),
                                       cmocka_unit_test(mutated_tables_are_read_or_refused)};
    return cmocka_run_group_tests(tests, NULL, NULL) != 0;
}
