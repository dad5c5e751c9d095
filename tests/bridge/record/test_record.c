/* A record keeps what it was given, in one chain, refuses what it can not keep, and says so. */
#include "../record_sessions.h"

#include <sqlite3.h>
#include <sys/stat.h>

struct tally {
    unsigned pulses, forces, marks;
    double last_force_n;
    struct record_reader *reader;
};

static bool count(void *context, const struct record_payload *payload)
{
    struct tally *tally = context;
    struct record_pulse_row pulse;
    struct record_force_row force;
    char mark[32];
    assert_non_null(payload->data);
    if (payload->entry->kind == RECORD_PULSES)
        for (size_t at = 0; at < payload->size; at += RECORD_PULSE_OCTETS) {
            record_pulse_decode(payload->data + at, &pulse);
            assert_int_equal(pulse.at_us, tally->pulses * 33334u);
            assert_int_equal(pulse.measured_ua, 39500 + tally->pulses);
            tally->pulses++;
        }
    if (payload->entry->kind == RECORD_FORCE)
        for (size_t at = 0; at < payload->size; at += RECORD_FORCE_OCTETS) {
            record_force_decode(payload->data + at, &force);
            tally->last_force_n = force.force_n;
            tally->forces++;
        }
    if (payload->entry->kind == RECORD_MARK) {
        record_text(tally->reader, payload, "mark", mark, sizeof mark);
        assert_string_equal(mark, "spasm");
        tally->marks++;
    }
    return true;
}

static void what_was_given_is_kept_to_the_last_reading(void **state)
{
    (void)state;
    char folder[RECORD_TEST_PATH], path[RECORD_TEST_PATH + 16], head[RECORD_HEAD_SIZE];
    struct message why = {""};
    struct tally tally = {0};
    record_test_folder(folder);
    (void)snprintf(path, sizeof path, "%s/a.db", folder);
    record_test_write(path, head);
    assert_status(record_open(path, &tally.reader, &why), STATUS_OK, &why);
    assert_status(record_walk(tally.reader, 0, count, &tally, &why), STATUS_OK, &why);
    assert_int_equal(tally.pulses, 20);
    assert_int_equal(tally.forces, 100);
    assert_int_equal(tally.marks, 1);
    assert_near(tally.last_force_n, 24.75, 0, 0);
    record_close(tally.reader);
    struct stat about;
    assert_int_equal(stat(path, &about), 0);
    assert_int_equal(about.st_mode & 0777, 0600);
    record_test_remove(folder);
}

static bool keep_glance(void *context, const struct record_glance *glance)
{
    *(struct record_glance *)context = *glance;
    return true;
}

static void a_session_is_listed_with_its_person_and_end(void **state)
{
    (void)state;
    char folder[RECORD_TEST_PATH], path[RECORD_TEST_PATH + 16], head[RECORD_HEAD_SIZE];
    struct message why = {""};
    struct record_reader *reader = NULL;
    struct record_glance glance;
    record_test_folder(folder);
    (void)snprintf(path, sizeof path, "%s/a.db", folder);
    record_test_write(path, head);
    assert_status(record_open(path, &reader, &why), STATUS_OK, &why);
    assert_status(record_sessions(reader, keep_glance, &glance, &why), STATUS_OK, &why);
    record_close(reader);
    assert_string_equal(glance.person, "P-017");
    assert_string_equal(glance.device, "A-003");
    assert_string_equal(glance.ended, "finished");
    assert_string_equal(glance.head, head);
    assert_true(glance.closed);
    assert_true(glance.begun_s == 1780000000);
    assert_true(glance.duration_us == 700000);
    record_test_remove(folder);
}

static void two_sessions_make_one_chain_and_an_older_head_is_found_in_it(void **state)
{
    (void)state;
    char folder[RECORD_TEST_PATH], path[RECORD_TEST_PATH + 16];
    char first[RECORD_HEAD_SIZE], second[RECORD_HEAD_SIZE];
    struct message why = {""};
    struct record_reader *reader = NULL;
    struct record_findings findings;
    record_test_folder(folder);
    (void)snprintf(path, sizeof path, "%s/a.db", folder);
    record_test_write(path, first);
    record_test_write(path, second);
    assert_string_not_equal(first, second);
    assert_status(record_open(path, &reader, &why), STATUS_OK, &why);
    assert_status(record_verify(reader, first, &findings, &why), STATUS_OK, &why);
    assert_int_equal(findings.sessions, 2);
    assert_string_equal(findings.head, second);
    assert_true(findings.head_at < findings.entries);
    first[0] = first[0] == '0' ? '1' : '0';
    assert_status(record_verify(reader, first, &findings, &why), STATUS_REFUSED, &why);
    record_close(reader);
    record_test_remove(folder);
}

static uint64_t room(const char *path, void *context)
{
    (void)path;
    return *(uint64_t *)context;
}

static void a_disk_with_less_than_64_mib_is_refused_and_nothing_is_made(void **state)
{
    (void)state;
    char folder[RECORD_TEST_PATH], path[RECORD_TEST_PATH + 16];
    struct message why = {""};
    struct record *record = NULL;
    uint64_t octets = (64ull << 20) - 1;
    const struct record_means means = {.free_octets = room, .context = &octets};
    const struct record_session session = record_test_session();
    record_test_folder(folder);
    (void)snprintf(path, sizeof path, "%s/a.db", folder);
    assert_status(record_begin_by(&means, path, &session, &record, &why), STATUS_REFUSED, &why);
    assert_non_null(strstr(why.text, "63 MiB"));
    assert_int_equal(access(path, F_OK), -1);
    octets++;
    assert_status(record_begin_by(&means, path, &session, &record, &why), STATUS_OK, &why);
    record_abandon(record);
    record_test_remove(folder);
}

static void a_file_of_another_kind_is_refused_and_left_as_it_was(void **state)
{
    (void)state;
    char folder[RECORD_TEST_PATH], path[RECORD_TEST_PATH + 16];
    struct message why = {""};
    struct record *record = NULL;
    struct record_reader *reader = NULL;
    const struct record_session session = record_test_session();
    sqlite3 *other = NULL;
    record_test_folder(folder);
    (void)snprintf(path, sizeof path, "%s/a.db", folder);
    assert_int_equal(sqlite3_open(path, &other), SQLITE_OK);
    assert_int_equal(sqlite3_exec(other, "CREATE TABLE t(a); INSERT INTO t VALUES(7)", NULL, NULL, NULL),
                     SQLITE_OK);
    assert_int_equal(sqlite3_close(other), SQLITE_OK);
    assert_status(record_begin(path, &session, &record, &why), STATUS_DOCUMENT, &why);
    assert_null(record);
    assert_status(record_open(path, &reader, &why), STATUS_DOCUMENT, &why);
    (void)snprintf(path, sizeof path, "%s/b.db", folder);
    assert_status(record_open(path, &reader, &why), STATUS_USAGE, &why);
    record_test_remove(folder);
}

static void what_is_no_json_object_is_no_event(void **state)
{
    (void)state;
    char folder[RECORD_TEST_PATH], path[RECORD_TEST_PATH + 16], head[RECORD_HEAD_SIZE];
    struct message why = {""};
    struct record *record = NULL;
    const struct record_session session = record_test_session();
    record_test_folder(folder);
    (void)snprintf(path, sizeof path, "%s/a.db", folder);
    assert_status(record_begin(path, &session, &record, &why), STATUS_OK, &why);
    assert_status(record_event(record, RECORD_MARK, 0, "spasm", &why), STATUS_INTERNAL, &why);
    assert_status(record_event(record, RECORD_BEGIN, 0, "{}", &why), STATUS_INTERNAL, &why);
    assert_true(record_is_sound(record, &why));
    assert_status(record_end(record, head, &why), STATUS_OK, &why);
    record_test_remove(folder);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(what_was_given_is_kept_to_the_last_reading),
        cmocka_unit_test(a_session_is_listed_with_its_person_and_end),
        cmocka_unit_test(two_sessions_make_one_chain_and_an_older_head_is_found_in_it),
        cmocka_unit_test(a_disk_with_less_than_64_mib_is_refused_and_nothing_is_made),
        cmocka_unit_test(a_file_of_another_kind_is_refused_and_left_as_it_was),
        cmocka_unit_test(what_is_no_json_object_is_no_event),
    };
    return cmocka_run_group_tests(tests, NULL, NULL) != 0;
}
