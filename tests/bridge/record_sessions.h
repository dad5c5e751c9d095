/* Records for tests: a session of invented numbers in a fresh folder. */
#ifndef PULSEWRIGHT_TESTS_BRIDGE_RECORD_SESSIONS_H
#define PULSEWRIGHT_TESTS_BRIDGE_RECORD_SESSIONS_H
#include "bridge/record/read.h"
#include "bridge/record/record.h"
#include "support/near.h"

#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <unistd.h>

enum { RECORD_TEST_PATH = 256 };

static inline void record_test_folder(char folder[RECORD_TEST_PATH])
{
    (void)snprintf(folder, RECORD_TEST_PATH, "%s/record-XXXXXX", PULSEWRIGHT_BUILD);
    assert_non_null(mkdtemp(folder));
}

static inline void record_test_remove(const char *folder)
{
    static const char *const names[] = {"a.db", "a.db-wal", "a.db-shm", "b.db", "b.db-wal", "b.db-shm"};
    char path[RECORD_TEST_PATH + 16];
    for (size_t i = 0; i < sizeof names / sizeof names[0]; i++) {
        (void)snprintf(path, sizeof path, "%s/%s", folder, names[i]);
        (void)unlink(path);
    }
    assert_int_equal(rmdir(folder), 0);
}

static inline struct record_session record_test_session(void)
{
    static const uint8_t root[32] = {1, 2, 3};
    return (struct record_session){.person = "P-017",
                                   .device = "A-003",
                                   .kind = "rehearsal",
                                   .approval = "REHEARSAL, TWIN ONLY",
                                   .program = "pulsewright test",
                                   .plan = "format: invented\n",
                                   .plan_size = 17,
                                   .root = root,
                                   .begun_s = 1780000000};
}

/* One whole session: start, 20 pulses, 100 readings, an ease, a mark, finished. Gives the head. */
static inline void record_test_write(const char *path, char head[RECORD_HEAD_SIZE])
{
    struct message why = {""};
    struct record *record = NULL;
    const struct record_session session = record_test_session();
    assert_status(record_begin(path, &session, &record, &why), STATUS_OK, &why);
    assert_status(record_event(record, RECORD_START, 0, "{\"first\": 1}", &why), STATUS_OK, &why);
    for (unsigned i = 0; i < 20; i++)
        assert_int_equal(record_pulse(record, i * 33334u, 1, 300, 40000, 39500 + i), STATUS_OK);
    for (unsigned i = 0; i < 100; i++)
        assert_int_equal(record_force(record, i * 10000u, 0.25 * i), STATUS_OK);
    assert_status(record_event(record, RECORD_EASE, 300000, "{\"channel\": 255, \"thousandths\": 700}", &why),
                  STATUS_OK, &why);
    assert_status(
        record_event(record, RECORD_MARK, 400000, "{\"mark\": \"spasm\", \"text\": \"left\"}", &why),
        STATUS_OK, &why);
    assert_status(record_event(record, RECORD_FINISHED, 700000, "{\"why\": \"end\", \"exact\": true}", &why),
                  STATUS_OK, &why);
    assert_status(record_end(record, head, &why), STATUS_OK, &why);
}

#endif
