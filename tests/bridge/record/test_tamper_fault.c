/* Records that were changed, ended by a kill, or written to a disk that fails. The goal of this code:
 * whatever is changed is found; whatever was acknowledged is there; what can not be written is never called
 * written. */
#include "../record_sessions.h"

#include "bridge/record/database.h"
#include <signal.h>
#include <sqlite3.h>
#include <sys/wait.h>

/* Every entry and payload as octets, to see whether two files hold the same. */
static bool add_to_dump(void *context, const struct record_payload *payload)
{
    FILE *out = context;
    (void)fprintf(out, "%llu %llu %u %llu ", (unsigned long long)payload->entry->n,
                  (unsigned long long)payload->entry->session, payload->entry->kind,
                  (unsigned long long)payload->entry->at_us);
    (void)fwrite(payload->entry->digest, 1, RECORD_DIGEST_SIZE, out);
    (void)fwrite(payload->entry->chain, 1, RECORD_DIGEST_SIZE, out);
    if (payload->data) (void)fwrite(payload->data, 1, payload->size, out);
    return true;
}

/* NULL where it can not be read; malloc'ed. */
static char *dump(const char *path, size_t *size)
{
    struct record_reader *reader = NULL;
    struct message why = {""};
    char *text = NULL;
    if (record_open(path, &reader, &why) != STATUS_OK) return NULL;
    FILE *out = open_memstream(&text, size);
    assert_non_null(out);
    const enum status status = record_walk(reader, 0, add_to_dump, out, &why);
    (void)fclose(out);
    record_close(reader);
    if (status == STATUS_OK) return text;
    free(text);
    return NULL;
}

static enum status verify(const char *path, const char *head, struct record_findings *findings,
                          struct message *why)
{
    struct record_reader *reader = NULL;
    enum status status = record_open(path, &reader, why);
    if (status == STATUS_OK) status = record_verify(reader, head, findings, why);
    record_close(reader);
    return status;
}

static char *read_file(const char *path, size_t *size)
{
    FILE *in = fopen(path, "rb");
    assert_non_null(in);
    assert_int_equal(fseek(in, 0, SEEK_END), 0);
    *size = (size_t)ftell(in);
    rewind(in);
    char *data = malloc(*size);
    assert_non_null(data);
    assert_int_equal(fread(data, 1, *size, in), *size);
    (void)fclose(in);
    return data;
}

static void write_file(const char *path, const char *data, size_t size)
{
    FILE *out = fopen(path, "wb");
    assert_non_null(out);
    assert_int_equal(fwrite(data, 1, size, out), size);
    (void)fclose(out);
}

/* A flip in a page's unused room changes nothing that is kept; any other is refused. */
static void a_flipped_octet_is_found_or_changes_nothing_that_is_kept(void **state)
{
    (void)state;
    char folder[RECORD_TEST_PATH], path[RECORD_TEST_PATH + 16], copy[RECORD_TEST_PATH + 16];
    char head[RECORD_HEAD_SIZE];
    size_t size = 0, kept_size = 0, found = 0, harmless = 0;
    struct record_findings findings;
    struct message why = {""};
    record_test_folder(folder);
    (void)snprintf(path, sizeof path, "%s/a.db", folder);
    (void)snprintf(copy, sizeof copy, "%s/b.db", folder);
    record_test_write(path, head);
    assert_status(verify(path, head, &findings, &why), STATUS_OK, &why);
    char *kept = dump(path, &kept_size);
    char *data = read_file(path, &size);
    assert_non_null(kept);
    for (size_t at = 0; at < size; at += 7) { /* prime to every structure's size */
        data[at] = (char)(data[at] ^ (1 << at % 8));
        write_file(copy, data, size);
        data[at] = (char)(data[at] ^ (1 << at % 8));
        if (verify(copy, head, &findings, &why) != STATUS_OK) {
            found++;
            assert_true(strlen(why.text) > 0);
            continue;
        }
        size_t now_size = 0;
        char *now = dump(copy, &now_size);
        assert_non_null(now);
        assert_int_equal(now_size, kept_size);
        assert_memory_equal(now, kept, kept_size);
        free(now);
        harmless++;
    }
    assert_true(found > 300);
    assert_true(harmless > 0);
    free(data);
    free(kept);
    record_test_remove(folder);
}

static void change(const char *path, const char *sql)
{
    sqlite3 *handle = NULL;
    char *error = NULL;
    assert_int_equal(sqlite3_open(path, &handle), SQLITE_OK);
    if (sqlite3_exec(handle, sql, NULL, NULL, &error) != SQLITE_OK) fail_msg("%s: %s", sql, error);
    assert_int_equal(sqlite3_close(handle), SQLITE_OK);
}

static void each_way_to_change_a_record_is_told_by_its_place(void **state)
{
    (void)state;
    static const struct {
        const char *sql, *told;
    } changes[] = {
        {"UPDATE payload SET data = '{\"first\": 2}' WHERE n = 3", "entry 3 (start of session 1)"},
        {"UPDATE payload SET salt = zeroblob(16) WHERE n = 2", "entry 2 (plan"},
        {"UPDATE entry SET at_us = at_us + 1 WHERE n = 5", "breaks at entry 5"},
        {"UPDATE entry SET kind = 7 WHERE n = 3", "breaks at entry 3"},
        {"UPDATE entry SET session = 2 WHERE n = 4", "breaks at entry 4"},
        {"UPDATE entry SET digest = zeroblob(32) WHERE n = 6", "breaks at entry 6"},
        {"DELETE FROM entry WHERE n = 4; DELETE FROM payload WHERE n = 4", "entry 4 is missing"},
        {"DELETE FROM payload WHERE n = 3", "entry 3 (start of session 1): what it holds is gone"},
        {"DELETE FROM entry WHERE n = 1", "entry 1 is missing"},
        {"INSERT INTO payload VALUES(99, zeroblob(16), '{}')", "payload 99 belongs to no entry"},
        {"INSERT INTO entry VALUES(10, 1, 25, 0, zeroblob(32), zeroblob(32))", "breaks at entry 10"},
        {"CREATE TRIGGER t AFTER INSERT ON entry BEGIN DELETE FROM payload; END", "unknown trigger t"},
    };
    char folder[RECORD_TEST_PATH], path[RECORD_TEST_PATH + 16], copy[RECORD_TEST_PATH + 16];
    char head[RECORD_HEAD_SIZE];
    size_t size = 0;
    struct record_findings findings;
    record_test_folder(folder);
    (void)snprintf(path, sizeof path, "%s/a.db", folder);
    (void)snprintf(copy, sizeof copy, "%s/b.db", folder);
    record_test_write(path, head);
    char *data = read_file(path, &size);
    for (size_t i = 0; i < sizeof changes / sizeof changes[0]; i++) {
        struct message why = {""};
        write_file(copy, data, size);
        change(copy, changes[i].sql);
        assert_status(verify(copy, NULL, &findings, &why), STATUS_REFUSED, &why);
        if (!strstr(why.text, changes[i].told)) fail_msg("%s: told \"%s\"", changes[i].sql, why.text);
    }
    free(data);
    record_test_remove(folder);
}

static void an_end_cut_off_needs_the_noted_head_to_be_found(void **state)
{
    (void)state;
    char folder[RECORD_TEST_PATH], path[RECORD_TEST_PATH + 16], head[RECORD_HEAD_SIZE];
    struct record_findings findings;
    struct message why = {""};
    record_test_folder(folder);
    (void)snprintf(path, sizeof path, "%s/a.db", folder);
    record_test_write(path, head);
    change(path, "DELETE FROM payload WHERE n > 6; DELETE FROM entry WHERE n > 6");
    assert_status(verify(path, NULL, &findings, &why), STATUS_OK, &why); /* said in the help: note the head */
    assert_status(verify(path, head, &findings, &why), STATUS_REFUSED, &why);
    record_test_remove(folder);
}

/* A child records as fast as it can and tells through a pipe each stop that was acknowledged. */
static void record_for_ever(const char *path, int tell)
{
    struct message why = {""};
    struct record *record = NULL;
    const struct record_session session = record_test_session();
    if (record_begin(path, &session, &record, &why) != STATUS_OK) _exit(1);
    for (unsigned i = 1;; i++) {
        char text[64];
        for (unsigned k = 0; k < 50; k++) (void)record_force(record, i, 1.0);
        (void)snprintf(text, sizeof text, "{\"number\": %u}", i);
        if (record_event(record, RECORD_STOP, i, text, &why) != STATUS_OK) _exit(2);
        if (write(tell, &i, sizeof i) != (ssize_t)sizeof i) _exit(3);
    }
}

static bool note_newest(void *context, const struct record_payload *payload)
{
    if (payload->entry->kind == RECORD_STOP) *(uint64_t *)context = payload->entry->at_us;
    return true;
}

static void a_kill_leaves_a_whole_chain_with_all_that_was_acknowledged(void **state)
{
    (void)state;
    char folder[RECORD_TEST_PATH], path[RECORD_TEST_PATH + 16], head[RECORD_HEAD_SIZE];
    struct record_findings findings;
    struct message why = {""};
    record_test_folder(folder);
    (void)snprintf(path, sizeof path, "%s/a.db", folder);
    for (unsigned round = 0; round < 6; round++) {
        int ends[2], way = 0;
        unsigned told = 0, number = 0;
        assert_int_equal(pipe(ends), 0);
        const pid_t child = fork();
        assert_true(child >= 0);
        if (child == 0) record_for_ever(path, ends[1]);
        (void)close(ends[1]);
        while (told < 5 + 3 * round && read(ends[0], &number, sizeof number) == (ssize_t)sizeof number)
            told = number;
        assert_int_equal(kill(child, SIGKILL), 0);
        while (read(ends[0], &number, sizeof number) == (ssize_t)sizeof number) told = number;
        assert_int_equal(waitpid(child, &way, 0), child);
        assert_true(WIFSIGNALED(way));
        (void)close(ends[0]);
        assert_status(verify(path, NULL, &findings, &why), STATUS_OK, &why);
        assert_int_equal(findings.sessions, round + 1);
        struct record_reader *reader = NULL;
        uint64_t newest = 0;
        assert_status(record_open(path, &reader, &why), STATUS_OK, &why);
        assert_status(record_walk(reader, 0, note_newest, &newest, &why), STATUS_OK, &why);
        record_close(reader);
        assert_true(newest >= told); /* one more may have been written and not told */
    }
    record_test_write(path, head); /* and a new session goes on with the chain */
    assert_status(verify(path, head, &findings, &why), STATUS_OK, &why);
    record_test_remove(folder);
}

/* A disk that is full after so many writes: SQLite's own disk layer with a counter before it. */
static int writes_left;
static int (*real_write)(sqlite3_file *, const void *, int, sqlite3_int64);
static int (*real_open)(sqlite3_vfs *, const char *, sqlite3_file *, int, int *);
static struct { /* SQLite has one table of methods for the database and one for its journals */
    const sqlite3_io_methods *real;
    sqlite3_io_methods full;
} methods[4];
static sqlite3_vfs full_disk;

static int full_write(sqlite3_file *file, const void *data, int size, sqlite3_int64 at)
{
    if (writes_left-- <= 0) return SQLITE_FULL;
    return real_write(file, data, size, at);
}

static int full_open(sqlite3_vfs *vfs, const char *name, sqlite3_file *file, int flags, int *flags_out)
{
    const int code = real_open(vfs, name, file, flags, flags_out);
    if (code != SQLITE_OK || !file->pMethods) return code;
    size_t i = 0;
    while (i < 3 && methods[i].real && methods[i].real != file->pMethods) i++;
    methods[i].real = file->pMethods;
    methods[i].full = *file->pMethods;
    methods[i].full.xWrite = full_write;
    real_write = file->pMethods->xWrite;
    file->pMethods = &methods[i].full;
    return code;
}

static void make_full_disk(void)
{
    full_disk = *sqlite3_vfs_find(NULL);
    full_disk.pNext = NULL;
    full_disk.zName = "full-disk";
    real_open = full_disk.xOpen;
    full_disk.xOpen = full_open;
    assert_int_equal(sqlite3_vfs_register(&full_disk, 0), SQLITE_OK);
}

static void on_a_disk_that_fills_nothing_is_called_written_that_is_not(void **state)
{
    (void)state;
    char folder[RECORD_TEST_PATH], path[RECORD_TEST_PATH + 16], head[RECORD_HEAD_SIZE] = "";
    const struct record_session session = record_test_session();
    const struct record_means means = {.vfs = "full-disk"};
    struct record_findings findings;
    unsigned refused_to_begin = 0, latched = 0;
    record_test_folder(folder);
    (void)snprintf(path, sizeof path, "%s/a.db", folder);
    make_full_disk();
    record_test_write(path, head); /* one that is there already */
    for (int room = 0; room < 60; room += 3) {
        struct message why = {""};
        struct record *record = NULL;
        uint64_t stops = 0, newest = 0;
        writes_left = room;
        if (record_begin_by(&means, path, &session, &record, &why) != STATUS_OK) {
            assert_null(record);
            refused_to_begin++;
            continue;
        }
        while (stops < 100 && record_event(record, RECORD_STOP, stops + 1, "{}", &why) == STATUS_OK) stops++;
        assert_true(stops < 100);
        assert_false(record_is_sound(record, &why));
        assert_true(strlen(why.text) > 0);
        assert_int_equal(record_force(record, 1, 1), STATUS_REFUSED); /* it stays so */
        writes_left = 1 << 30;
        assert_status(record_end(record, head, &why), STATUS_REFUSED, &why);
        latched++;
        assert_status(verify(path, NULL, &findings, &why), STATUS_OK, &why);
        struct record_reader *reader = NULL;
        assert_status(record_open(path, &reader, &why), STATUS_OK, &why);
        assert_status(record_walk(reader, 0, note_newest, &newest, &why), STATUS_OK, &why);
        record_close(reader);
        assert_true(newest >= stops);
    }
    assert_true(refused_to_begin > 0);
    assert_true(latched > 0);
    assert_int_equal(sqlite3_vfs_unregister(&full_disk), SQLITE_OK);
    record_test_remove(folder);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(a_flipped_octet_is_found_or_changes_nothing_that_is_kept),
        cmocka_unit_test(each_way_to_change_a_record_is_told_by_its_place),
        cmocka_unit_test(an_end_cut_off_needs_the_noted_head_to_be_found),
        cmocka_unit_test(a_kill_leaves_a_whole_chain_with_all_that_was_acknowledged),
        cmocka_unit_test(on_a_disk_that_fills_nothing_is_called_written_that_is_not),
    };
    return cmocka_run_group_tests(tests, NULL, NULL) != 0;
}
