/* The gate: who may sign, what a signature covers, what may start, and every reason why not. */
#include "bridge/gate/gate.h"
#include "core/document/stimulator.h"
#include "core/document/train_document.h"
#include "core/plan/plan.h"
#include "support/near.h"

#include <dirent.h>
#include <sodium.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/stat.h>
#include <sys/wait.h>
#include <unistd.h>

enum { NOW_S = 1900000000 };
static char folder[64];
static struct plan plan;
static struct document_bytes plan_bytes;
static struct image image;
static struct site site;
static struct secret_key *site_key, *clinician, *engineer;
static struct message why;

static const char *in_folder(const char *name)
{
    static char path[4][400];
    static int next;
    next = (next + 1) % 4;
    (void)snprintf(path[next], sizeof path[next], "%s/%s", folder, name);
    return path[next];
}

/* RFC 8032, 7.1, test 2: the signature of one octet. */
static void ed25519_is_that_of_the_standard(void **state)
{
    (void)state;
    static const char public_hex[] = "3d4017c3e843895a92b70aa74d1b7ebc9c982ccf2ec4968cc0cd55f12af4660c";
    static const char signature_hex[] = "92a009a9f0d4cab8720e820b5f642540a2b27b5416503f8fb3762223ebdb69da085a"
                                        "c1e43e15996e458f3613d0f11d8c387b2eaeb4302aeeb00d291612bb0c00";
    uint8_t public_key[32], signature[64], message = 0x72;
    assert_int_equal(sodium_hex2bin(public_key, 32, public_hex, 64, NULL, NULL, NULL), 0);
    assert_int_equal(sodium_hex2bin(signature, 64, signature_hex, 128, NULL, NULL, NULL), 0);
    assert_true(key_verify(public_key, &message, 1, signature));
    message ^= 1;
    assert_false(key_verify(public_key, &message, 1, signature));
}

static void add_signer(const char *name, enum signer_role role, struct secret_key *key)
{
    struct signer *signer = &site.signer[site.signers++];
    memset(signer, 0, sizeof *signer);
    (void)snprintf(signer->name, sizeof signer->name, "%s", name);
    signer->role = role;
    memcpy(signer->public_key, key_public(key), KEY_PUBLIC_SIZE);
}

static struct signoff approved(void)
{
    static uint8_t next_id = 1; /* each sign-off has its own */
    struct signoff signoff = {.kind = SIGNOFF_CLINICAL,
                              .images = 1,
                              .starts_in_all = 2,
                              .sessions = 2,
                              .resumes = 1,
                              .channels = 1,
                              .person = "P-001",
                              .unit = "A-003",
                              .signer = "S-2",
                              .role = "clinician",
                              .created_s = NOW_S,
                              .not_before_s = NOW_S,
                              .expires_s = NOW_S + 3600,
                              .program = "test"};
    memcpy(signoff.image[0].root, image.root, IMAGE_ROOT_SIZE);
    memcpy(signoff.image[0].plan_digest, plan_bytes.digest, DIGEST_SIZE);
    signoff.image[0].starts = 2;
    signoff.channel[0].channel = 1;
    (void)snprintf(signoff.channel[0].muscle, sizeof signoff.channel[0].muscle, "left-quadriceps");
    key_id(key_public(clinician), signoff.key_id);
    memset(signoff.id, next_id++, sizeof signoff.id);
    return signoff;
}

static struct gate_request request_of(const struct signoff *signoff)
{
    return (struct gate_request){.image = &image,
                                 .plan_digest = plan_bytes.digest,
                                 .unit_said = "A-003",
                                 .device_is_twin = true,
                                 .signoff = signoff,
                                 .person = "P-001",
                                 .has_record = true};
}

static void refused(const struct gate_request *request, uint64_t now_s, const char *reason)
{
    why.text[0] = '\0';
    assert_int_equal(gate_may_start(request, &site, now_s, false, &why), STATUS_REFUSED);
    if (!strstr(why.text, reason)) print_error("said: %s\n", why.text);
    assert_non_null(strstr(why.text, reason));
}

static void what_was_approved_may_start(void **state)
{
    (void)state;
    const struct signoff signoff = approved();
    const struct gate_request request = request_of(&signoff);
    assert_status(gate_may_start(&request, &site, NOW_S + 10, false, &why), STATUS_OK, &why);
}

static void each_thing_that_is_wrong_is_told(void **state)
{
    (void)state;
    struct signoff signoff = approved();
    struct gate_request request = request_of(&signoff);
    refused(&request, NOW_S - 1, "not valid yet");
    refused(&request, NOW_S + 3600, "ended at");
    request.person = "P-002";
    refused(&request, NOW_S, "for P-001, not for P-002");
    request.person = NULL;
    refused(&request, NOW_S, "typed again");
    request = request_of(&signoff);
    request.unit_said = "A-004";
    refused(&request, NOW_S, "unit A-003");
    request = request_of(&signoff);
    request.link_is_real = true;
    request.has_record = false;
    refused(&request, NOW_S, "without a record");
    request = request_of(&signoff);
    uint8_t other[DIGEST_SIZE] = {1};
    request.plan_digest = other;
    refused(&request, NOW_S, "plan is not the one");
    signoff.image[0].root[3] ^= 1;
    request = request_of(&signoff);
    refused(&request, NOW_S, "not among those that were signed");
    signoff = approved();
    signoff.expires_s = NOW_S + 8 * 86400;
    request = request_of(&signoff);
    refused(&request, NOW_S, "more than 7 days");
    request.signoff = NULL;
    refused(&request, NOW_S, "no sign-off");
}

static void signer_has_to_be_listed_with_this_key_and_a_role_that_may(void **state)
{
    (void)state;
    struct signoff signoff = approved();
    struct gate_request request = request_of(&signoff);
    (void)snprintf(signoff.signer, sizeof signoff.signer, "S-9");
    refused(&request, NOW_S, "no signer of this site");
    signoff = approved();
    key_id(key_public(engineer), signoff.key_id);
    refused(&request, NOW_S, "key that is listed");
    (void)snprintf(signoff.signer, sizeof signoff.signer, "E-1");
    (void)snprintf(signoff.role, sizeof signoff.role, "engineer");
    refused(&request, NOW_S, "rehearsals only");
    signoff = approved();
    site.signer[0].withdrawn = true;
    refused(&request, NOW_S, "withdrawn");
    site.signer[0].withdrawn = false;
}

static void all_reasons_are_told_in_one_pass(void **state)
{
    (void)state;
    struct signoff signoff = approved();
    struct gate_request request = request_of(&signoff);
    request.person = "P-002";
    request.unit_said = "A-004";
    refused(&request, NOW_S + 7200, "ended at");
    assert_non_null(strstr(why.text, "P-002"));
    assert_non_null(strstr(why.text, "A-004"));
}

static void sessions_and_resumes_are_used_up_and_the_clock_never_goes_back(void **state)
{
    (void)state;
    const struct signoff signoff = approved();
    struct gate_request request = request_of(&signoff);
    assert_status(gate_may_start(&request, &site, NOW_S + 100, true, &why), STATUS_OK, &why);
    refused(&request, NOW_S + 50, "earlier than the newest use");
    request.resume = true;
    assert_status(gate_may_start(&request, &site, NOW_S + 200, true, &why), STATUS_OK, &why);
    refused(&request, NOW_S + 300, "resumes are used up");
    request.resume = false;
    assert_status(gate_may_start(&request, &site, NOW_S + 400, true, &why), STATUS_OK, &why);
    refused(&request, NOW_S + 500, "used up");
    const struct signoff late = approved();
    request = request_of(&late);
    request.resume = true;
    refused(&request, NOW_S + 600, "nothing to resume");
}

static struct image another_image(uint8_t kind)
{
    struct image other = image;
    other.header.kind = kind;
    memset(other.root, 0xA5, sizeof other.root);
    return other;
}

static void only_what_was_begun_and_has_not_finished_is_resumed_by_its_stop(void **state)
{
    (void)state;
    struct signoff signoff = approved();
    signoff.expires_s = NOW_S + 86400;
    const struct image other = another_image(IMAGE_TIMED);
    signoff.images = 2;
    signoff.resumes = 3;
    signoff.image[1] = signoff.image[0];
    memcpy(signoff.image[1].root, other.root, IMAGE_ROOT_SIZE);
    struct gate_request request = request_of(&signoff);
    assert_status(gate_may_start(&request, &site, NOW_S + 1000, true, &why), STATUS_OK, &why);
    request.resume = true;
    request.image = &other;
    refused(&request, NOW_S + 1010, "nothing to resume");
    request.image = &image;
    refused(&request, NOW_S + 1000 + 1801, "within 30 minutes"); /* no stop was written: the start counts */
    assert_status(gate_note_end(&request, &site, NOW_S + 1000 + 2000, false, &why), STATUS_OK, &why);
    assert_status(gate_may_start(&request, &site, NOW_S + 1000 + 3500, true, &why), STATUS_OK, &why);
    assert_status(gate_note_end(&request, &site, NOW_S + 1000 + 3550, true, &why), STATUS_OK, &why);
    refused(&request, NOW_S + 1000 + 3560, "or they finished");
}

static void a_held_image_uses_no_session(void **state)
{
    (void)state;
    struct signoff signoff = approved();
    signoff.expires_s = NOW_S + 86400;
    const struct image held = another_image(IMAGE_HELD);
    signoff.images = 2;
    signoff.sessions = 1;
    signoff.starts_in_all = 3;
    signoff.image[1] = signoff.image[0];
    memcpy(signoff.image[1].root, held.root, IMAGE_ROOT_SIZE);
    struct gate_request request = request_of(&signoff);
    request.image = &held;
    assert_status(gate_may_start(&request, &site, NOW_S + 5000, true, &why), STATUS_OK, &why);
    assert_status(gate_may_start(&request, &site, NOW_S + 5001, true, &why), STATUS_OK, &why);
    refused(&request, NOW_S + 5002, "starts of this plan are used up");
    request.image = &image;
    assert_status(gate_may_start(&request, &site, NOW_S + 5003, true, &why), STATUS_OK, &why);
    refused(&request, NOW_S + 5004, "session is used up");
    assert_non_null(strstr(why.text, "3 starts are used up"));
}

static void nothing_starts_without_a_device_and_a_person(void **state)
{
    (void)state;
    const struct signoff signoff = approved();
    struct gate_request request = request_of(&signoff);
    request.person = request.unit_said = NULL;
    assert_status(gate_may_start(&request, &site, NOW_S + 6, false, &why), STATUS_REFUSED,
                  &why); /* the clock */
    assert_status(gate_may_start(&request, &site, NOW_S + 5100, false, &why), STATUS_REFUSED, &why);
    assert_null(strstr(why.text, "typed again")); /* verify asks for neither */
    assert_int_equal(gate_may_start(&request, &site, NOW_S + 5100, true, &why), STATUS_REFUSED);
    assert_non_null(strstr(why.text, "typed again"));
    assert_non_null(strstr(why.text, "which one it is"));
}

/* Every octet, one bit each; and a line less. */
static void a_line_of_uses_that_was_changed_or_taken_out_lets_nothing_start(void **state)
{
    (void)state;
    struct signoff signoff = approved();
    const struct gate_request request = request_of(&signoff);
    struct document_bytes bytes;
    char path[400];
    signoff.expires_s = NOW_S + 86400;
    (void)snprintf(path, sizeof path, "%s/uses", folder);
    assert_status(document_read_bytes(path, &bytes, &why), STATUS_OK, &why);
    assert_status(gate_may_start(&request, &site, NOW_S + 6000, false, &why), STATUS_OK, &why);
    for (size_t at = 0; at < bytes.size; at++) {
        bytes.data[at] ^= 1;
        FILE *out = fopen(path, "w");
        assert_int_equal(fwrite(bytes.data, 1, bytes.size, out), bytes.size);
        fclose(out);
        bytes.data[at] ^= 1;
        assert_int_equal(gate_may_start(&request, &site, NOW_S + 6000, true, &why), STATUS_REFUSED);
        assert_non_null(strstr(why.text, "is damaged"));
    }
    const size_t first = (size_t)(strchr(bytes.data, '\n') + 1 - bytes.data);
    FILE *out = fopen(path, "w"); /* the first line taken out */
    assert_int_equal(fwrite(bytes.data + first, 1, bytes.size - first, out), bytes.size - first);
    fclose(out);
    assert_int_equal(gate_may_start(&request, &site, NOW_S + 6000, true, &why), STATUS_REFUSED);
    assert_non_null(strstr(why.text, "line 1 is damaged"));
    out = fopen(path, "w");
    assert_int_equal(fwrite(bytes.data, 1, bytes.size, out), bytes.size);
    fclose(out);
    document_bytes_free(&bytes);
}

/* Eight programs ask at the same moment for one session: one gets it. */
static void programs_at_once_share_the_sessions(void **state)
{
    (void)state;
    enum { PROGRAMS = 8 };
    struct signoff signoff = approved();
    signoff.expires_s = NOW_S + 86400;
    signoff.sessions = signoff.starts_in_all = 1;
    const struct gate_request request = request_of(&signoff);
    pid_t child[PROGRAMS];
    unsigned started = 0;
    for (unsigned i = 0; i < PROGRAMS; i++) {
        child[i] = fork();
        assert_true(child[i] >= 0);
        if (child[i] == 0)
            _exit(gate_may_start(&request, &site, NOW_S + 5500, true, &why) == STATUS_OK ? 7 : 3);
    }
    for (unsigned i = 0; i < PROGRAMS; i++) {
        int way = 0;
        assert_int_equal(waitpid(child[i], &way, 0), child[i]);
        assert_true(WIFEXITED(way) && (WEXITSTATUS(way) == 7 || WEXITSTATUS(way) == 3));
        started += WEXITSTATUS(way) == 7 ? 1 : 0;
    }
    assert_int_equal(started, 1);
}

static void rehearsals_never_reach_a_real_port_or_a_real_device(void **state)
{
    (void)state;
    struct image rehearsal;
    assert_status(image_of_plan(&plan, NULL, SIGNOFF_REHEARSAL, &rehearsal, &why), STATUS_OK, &why);
    struct gate_request request = {
        .image = &rehearsal, .unit_said = "A-003", .device_is_twin = true, .rehearse = true};
    assert_status(gate_may_start(&request, NULL, NOW_S, true, &why), STATUS_OK, &why);
    request.link_is_real = true;
    request.has_record = true;
    refused(&request, NOW_S, "real port");
    request.link_is_real = false;
    request.device_is_twin = false;
    refused(&request, NOW_S, "twin only");
    request.device_is_twin = true;
    request.image = &image;
    refused(&request, NOW_S, "not compiled for a rehearsal");
    image_free(&rehearsal);
}

/* Every octet of a sign-off with a plan in it, one bit each: refused. */
static void any_flipped_octet_of_a_signoff_is_refused(void **state)
{
    (void)state;
    const struct signoff signoff = approved();
    const char *path = in_folder("a.signoff"), *changed = in_folder("b.signoff");
    struct signoff_file *file = calloc(1, sizeof *file);
    struct document_bytes bytes;
    struct stat about;
    assert_status(signoff_write(path, &signoff, clinician, &plan_bytes, 1, &why), STATUS_OK, &why);
    assert_int_equal(stat(path, &about), 0);
    assert_int_equal(about.st_mode & 0777, 0600);
    assert_status(signoff_read(path, file, &why), STATUS_OK, &why);
    assert_memory_equal(&file->signoff.image[0], &signoff.image[0], sizeof signoff.image[0]);
    assert_string_equal(file->signoff.person, "P-001");
    signoff_file_free(file);
    assert_int_equal(signoff_write(path, &signoff, clinician, &plan_bytes, 1, &why),
                     STATUS_USAGE); /* never over an existing one */
    assert_status(document_read_bytes(path, &bytes, &why), STATUS_OK, &why);
    for (size_t at = 0; at < bytes.size; at++) {
        bytes.data[at] ^= (char)(1 << at % 8);
        FILE *out = fopen(changed, "w");
        assert_int_equal(fwrite(bytes.data, 1, bytes.size, out), bytes.size);
        fclose(out);
        assert_int_equal(signoff_read(changed, file, &why), STATUS_REFUSED);
        assert_true(strlen(why.text) > 10);
        bytes.data[at] ^= (char)(1 << at % 8);
    }
    document_bytes_free(&bytes);
    free(file);
}

static void any_flipped_octet_of_the_list_of_signers_is_refused(void **state)
{
    (void)state;
    struct site *loaded = calloc(1, sizeof *loaded);
    struct document_bytes bytes;
    char path[400];
    (void)snprintf(path, sizeof path, "%s/signers", folder);
    assert_status(site_load(folder, false, loaded, &why), STATUS_OK, &why);
    assert_int_equal(loaded->signers, 2);
    assert_status(document_read_bytes(path, &bytes, &why), STATUS_OK, &why);
    for (size_t at = 0; at < bytes.size; at++) {
        bytes.data[at] ^= 4;
        FILE *out = fopen(path, "w");
        assert_int_equal(fwrite(bytes.data, 1, bytes.size, out), bytes.size);
        fclose(out);
        assert_int_equal(site_load(folder, false, loaded, &why), STATUS_REFUSED);
        bytes.data[at] ^= 4;
    }
    FILE *out = fopen(path, "w");
    assert_int_equal(fwrite(bytes.data, 1, bytes.size, out), bytes.size);
    fclose(out);
    /* an old list put back: its serial is lower than what was seen */
    assert_status(site_load(folder, false, loaded, &why), STATUS_OK, &why);
    assert_status(site_save(loaded, site_key, &why), STATUS_OK, &why);
    out = fopen(path, "w");
    assert_int_equal(fwrite(bytes.data, 1, bytes.size, out), bytes.size);
    fclose(out);
    assert_int_equal(site_load(folder, false, loaded, &why), STATUS_REFUSED);
    assert_non_null(strstr(why.text, "old list"));
    document_bytes_free(&bytes);
    free(loaded);
}

static void secret_keys_rest_boxed_and_open_with_their_passphrase_only(void **state)
{
    (void)state;
    struct secret_key *key = NULL;
    struct document_bytes bytes;
    struct stat about;
    const char *path = in_folder("S-2.key");
    assert_status(key_save(clinician, path, "right passphrase", KEY_COST_TEST, &why), STATUS_OK, &why);
    assert_int_equal(stat(path, &about), 0);
    assert_int_equal(about.st_mode & 0777, 0600);
    assert_int_equal(key_load(path, "wrong passphrase", &key, &why), STATUS_REFUSED);
    assert_status(key_load(path, "right passphrase", &key, &why), STATUS_OK, &why);
    assert_memory_equal(key_public(key), key_public(clinician), KEY_PUBLIC_SIZE);
    assert_int_equal(key_save(clinician, path, "right passphrase", KEY_COST_TEST, &why), STATUS_USAGE);
    assert_int_equal(key_save(clinician, in_folder("short.key"), "short", KEY_COST_TEST, &why), STATUS_USAGE);
    /* the seed, the first 32 octets of an Ed25519 secret, stands nowhere in the file */
    uint8_t signature[KEY_SIGNATURE_SIZE];
    key_sign(key, "x", 1, signature);
    assert_status(document_read_bytes(path, &bytes, &why), STATUS_OK, &why);
    for (size_t at = 0; at + 32 <= bytes.size; at++) {
        uint8_t public_key[32], secret[64];
        (void)crypto_sign_seed_keypair(public_key, secret, (const uint8_t *)bytes.data + at);
        assert_memory_not_equal(public_key, key_public(key), 32);
    }
    /* a file that asks for more than 10 passes is refused before any work */
    bytes.data[24] = 11;
    FILE *out = fopen(in_folder("greedy.key"), "w");
    assert_int_equal(fwrite(bytes.data, 1, bytes.size, out), bytes.size);
    fclose(out);
    struct secret_key *greedy = NULL;
    assert_int_equal(key_load(in_folder("greedy.key"), "right passphrase", &greedy, &why), STATUS_DOCUMENT);
    document_bytes_free(&bytes);
    key_free(key);
}

static void statement_is_strict(void **state)
{
    (void)state;
    static uint8_t octets[SIGNOFF_STATEMENT_MAX];
    struct signoff signoff = approved(), back;
    const size_t size = statement_encode(&signoff, octets);
    assert_true(size > 200);
    assert_memory_equal(octets, "pulsewright-signoff-1", 22);
    assert_true(statement_decode(octets, size, &back));
    assert_memory_equal(&signoff, &back, sizeof back);
    assert_false(statement_decode(octets, size - 1, &back));
    assert_false(statement_decode(octets, size + 1, &back));
    signoff.images = SIGNOFF_IMAGES_MAX + 1;
    assert_int_equal(statement_encode(&signoff, octets), 0);
}

static void image_says_exactly_what_the_plan_says(void **state)
{
    (void)state;
    const struct train_grid grid = stimulator_grid(&plan.stimulator);
    uint64_t pulses = 0;
    for (uint32_t i = 0; i + 1 < image.n; i++) {
        struct segment_cursor cursor;
        struct pulse pulse;
        segment_begin(&cursor, &image.segments[i].segment, &grid);
        while (segment_next(&cursor, &pulse)) pulses++;
    }
    assert_int_equal(pulses, image.header.pulses);
    assert_int_equal(pulses, 2 * 30);
    assert_string_equal(image.identity.unit, "A-003");
    struct plan nameless = plan;
    nameless.stimulator.unit[0] = '\0';
    struct image none;
    assert_int_equal(image_of_plan(&nameless, NULL, SIGNOFF_CLINICAL, &none, &why), STATUS_REFUSED);
    assert_non_null(strstr(why.text, "which very device"));
}

/* Two trains of 30 pulses, invented, compiled for the sample stimulator. */
static void make_plan(void)
{
    static char text[] = "format: pulsewright-train-1\ncontractions:\n  - {frequency_pps: 30, duration_us: "
                         "300, current_ma: 40, hold_ms: 1000, rest_ms: 2000, repeat: 2}\n";
    struct document_bytes bytes = {.path = "train", .data = text, .size = sizeof text - 1};
    struct train train;
    struct profile profile;
    struct stimulator stimulator;
    struct text_out out = {0};
    const struct plan_options options = {0};
    assert_status(train_parse(&bytes, &train, &why), STATUS_OK, &why);
    assert_status(profile_load(PULSEWRIGHT_SOURCE "/profiles/people/p-001.yaml", &profile, &why), STATUS_OK,
                  &why);
    assert_status(stimulator_load(PULSEWRIGHT_SOURCE "/profiles/stimulators/bench-a.yaml", &stimulator, &why),
                  STATUS_OK, &why);
    assert_status(
        plan_of_train(&train, &profile, "left-quadriceps", &stimulator, NULL, &options, &plan, &why),
        STATUS_OK, &why);
    plan_print(&plan, &out);
    plan_bytes = (struct document_bytes){.path = "plan", .data = out.data, .size = out.size};
    document_bytes_digest(&plan_bytes);
    assert_status(image_of_plan(&plan, NULL, SIGNOFF_CLINICAL, &image, &why), STATUS_OK, &why);
    train_free(&train);
    profile_free(&profile);
}

static int begin(void **state)
{
    (void)state;
    (void)snprintf(folder, sizeof folder, "gate-test-%ld", (long)getpid());
    if (mkdir(folder, 0700) != 0 || keys_begin(&why) != STATUS_OK) return 1;
    if (key_make(&site_key, &why) != STATUS_OK || key_make(&clinician, &why) != STATUS_OK ||
        key_make(&engineer, &why) != STATUS_OK)
        return 1;
    if (site_begin(folder, site_key, &why) != STATUS_OK || site_load(folder, false, &site, &why) != STATUS_OK)
        return 1;
    add_signer("S-2", ROLE_CLINICIAN, clinician);
    add_signer("E-1", ROLE_ENGINEER, engineer);
    if (site_save(&site, site_key, &why) != STATUS_OK) return 1;
    make_plan();
    return 0;
}

static int end(void **state)
{
    (void)state;
    image_free(&image);
    plan_free(&plan);
    document_bytes_free(&plan_bytes);
    key_free(site_key);
    key_free(clinician);
    key_free(engineer);
    DIR *entries = opendir(folder);
    for (struct dirent *entry; entries && (entry = readdir(entries)) != NULL;)
        if (entry->d_name[0] != '.') (void)unlink(in_folder(entry->d_name));
    if (entries) closedir(entries);
    return rmdir(folder);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(ed25519_is_that_of_the_standard),
        cmocka_unit_test(what_was_approved_may_start),
        cmocka_unit_test(each_thing_that_is_wrong_is_told),
        cmocka_unit_test(signer_has_to_be_listed_with_this_key_and_a_role_that_may),
        cmocka_unit_test(all_reasons_are_told_in_one_pass),
        cmocka_unit_test(sessions_and_resumes_are_used_up_and_the_clock_never_goes_back),
        cmocka_unit_test(only_what_was_begun_and_has_not_finished_is_resumed_by_its_stop),
        cmocka_unit_test(a_held_image_uses_no_session),
        cmocka_unit_test(nothing_starts_without_a_device_and_a_person),
        cmocka_unit_test(programs_at_once_share_the_sessions),
        cmocka_unit_test(a_line_of_uses_that_was_changed_or_taken_out_lets_nothing_start),
        cmocka_unit_test(rehearsals_never_reach_a_real_port_or_a_real_device),
        cmocka_unit_test(any_flipped_octet_of_a_signoff_is_refused),
        cmocka_unit_test(any_flipped_octet_of_the_list_of_signers_is_refused),
        cmocka_unit_test(secret_keys_rest_boxed_and_open_with_their_passphrase_only),
        cmocka_unit_test(statement_is_strict),
        cmocka_unit_test(image_says_exactly_what_the_plan_says),
    };
    return cmocka_run_group_tests(tests, begin, end) != 0;
}
