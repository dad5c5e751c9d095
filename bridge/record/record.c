/* The writer of a record. The goal of this code: streaming never waits for a disk, and nothing that matters
 * (a sign-off, a start, a fault, a stop) is said to be recorded before it is on the disk. A thread of its own
 * commits every 250 ms; the synchronous kinds are committed at once, SQLite's synchronous FULL. The first
 * thing that can not be written latches: everything after it is refused, so that the caller stops. */
#include "bridge/record/record.h"

#include "bridge/record/database.h"
#include <errno.h>
#include <pthread.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/statvfs.h>
#include <time.h>

/* What may wait for the disk at most: minutes of a session; more means the disk stands still. */
enum { WAITING_OCTETS_MAX = 16 << 20, FIRST_CAPACITY = 64 << 10 };

struct buffer {
    uint8_t *data;
    size_t size, capacity;
};

/* Before each payload in a buffer. */
struct item {
    uint64_t at_us;
    size_t size;
    unsigned kind;
};

struct batch {
    struct buffer events, pulses, forces;
    uint64_t pulses_at_us, forces_at_us; /* of the first row */
    bool synchronous;
};

struct record {
    struct database database; /* the writer's, but before it runs and after it ended */
    uint64_t session;
    pthread_t writer;
    bool running;
    pthread_mutex_t lock; /* of all below */
    pthread_cond_t work, written;
    struct batch filling, writing;
    uint64_t asked, done; /* batches handed over and written */
    bool closing, failed;
    struct message failure;
};

static bool buffer_add(struct buffer *buffer, const void *data, size_t size)
{
    const size_t needed = buffer->size + size;
    if (needed > WAITING_OCTETS_MAX) return false;
    if (needed > buffer->capacity) {
        size_t capacity = buffer->capacity ? buffer->capacity : FIRST_CAPACITY;
        while (capacity < needed) capacity *= 2;
        uint8_t *grown = realloc(buffer->data, capacity);
        if (!grown) return false;
        buffer->data = grown;
        buffer->capacity = capacity;
    }
    if (size) memcpy(buffer->data + buffer->size, data, size);
    buffer->size = needed;
    return true;
}

static void batch_empty(struct batch *batch)
{
    batch->events.size = batch->pulses.size = batch->forces.size = 0;
    batch->synchronous = false;
}

static void batch_free(struct batch *batch)
{
    free(batch->events.data);
    free(batch->pulses.data);
    free(batch->forces.data);
}

static bool batch_is_empty(const struct batch *batch)
{
    return batch->events.size + batch->pulses.size + batch->forces.size == 0;
}

/* Rows first: what an event ends was delivered before it. */
static enum status append_batch(struct record *record, const struct batch *batch, struct message *why)
{
    struct database *database = &record->database;
    enum status status = STATUS_OK;
    const struct {
        const struct buffer *rows;
        unsigned kind;
        uint64_t at_us;
    } kinds[] = {{&batch->pulses, RECORD_PULSES, batch->pulses_at_us},
                 {&batch->forces, RECORD_FORCE, batch->forces_at_us}};
    for (size_t i = 0; i < sizeof kinds / sizeof kinds[0] && status == STATUS_OK; i++) {
        struct record_entry entry = {
            .session = record->session, .kind = kinds[i].kind, .at_us = kinds[i].at_us};
        if (kinds[i].rows->size)
            status = database_append(database, &entry, kinds[i].rows->data, kinds[i].rows->size, why);
    }
    for (size_t at = 0; at < batch->events.size && status == STATUS_OK;) {
        struct item item;
        memcpy(&item, batch->events.data + at, sizeof item);
        at += sizeof item;
        struct record_entry entry = {.session = record->session, .kind = item.kind, .at_us = item.at_us};
        status = database_append(database, &entry, batch->events.data + at, item.size, why);
        at += item.size;
    }
    return status;
}

static enum status write_batch(struct record *record, const struct batch *batch, struct message *why)
{
    if (batch_is_empty(batch)) return STATUS_OK;
    enum status status = database_begin(&record->database, batch->synchronous, why);
    if (status != STATUS_OK) return status;
    status = append_batch(record, batch, why);
    if (status == STATUS_OK) status = database_commit(&record->database, why);
    if (status != STATUS_OK) database_roll_back(&record->database);
    return status;
}

static struct timespec after_ms(long ms)
{
    struct timespec at;
    (void)clock_gettime(CLOCK_MONOTONIC, &at);
    at.tv_nsec += ms * 1000000L;
    at.tv_sec += at.tv_nsec / 1000000000L;
    at.tv_nsec %= 1000000000L;
    return at;
}

/* Waits until a batch is due: its time is up, or somebody waits for it. */
static void wait_for_work(struct record *record)
{
    const struct timespec until = after_ms(RECORD_COMMIT_MS);
    while (!record->filling.synchronous && !record->closing)
        if (pthread_cond_timedwait(&record->work, &record->lock, &until) == ETIMEDOUT) return;
}

static void *write_all(void *context)
{
    struct record *record = context;
    bool closing = false;
    (void)pthread_mutex_lock(&record->lock);
    while (!closing) {
        wait_for_work(record);
        closing = record->closing;
        const struct batch filled = record->filling;
        record->filling = record->writing;
        record->writing = filled;
        batch_empty(&record->filling);
        const uint64_t number = record->asked++;
        const bool failed = record->failed;
        (void)pthread_mutex_unlock(&record->lock);
        struct message why = {""};
        const enum status status = failed ? STATUS_REFUSED : write_batch(record, &record->writing, &why);
        (void)pthread_mutex_lock(&record->lock);
        if (status != STATUS_OK && !record->failed) {
            record->failed = true;
            record->failure = why;
        }
        record->done = number + 1;
        (void)pthread_cond_broadcast(&record->written);
    }
    (void)pthread_mutex_unlock(&record->lock);
    return NULL;
}

static enum status check_room(const struct record_means *means, const char *path, struct message *why)
{
    char folder[1024];
    const char *slash = strrchr(path, '/');
    const size_t length = slash ? (size_t)(slash - path) : 0;
    if (length >= sizeof folder) return status_fail(why, STATUS_USAGE, "\"%.80s\" is no usable path", path);
    memcpy(folder, path, length);
    folder[length] = '\0';
    if (!slash) memcpy(folder, ".", 2);
    if (slash == path) memcpy(folder, "/", 2);
    struct statvfs disk = {0};
    uint64_t free_octets = 0;
    if (means && means->free_octets)
        free_octets = means->free_octets(path, means->context);
    else if (statvfs(folder, &disk) == 0)
        free_octets = (uint64_t)disk.f_bavail * disk.f_frsize;
    else
        return status_fail(why, STATUS_REFUSED, "the record %s: %s", path, strerror(errno));
    const uint64_t mib = free_octets >> 20;
    if (mib >= RECORD_FREE_MIB_LEAST) return STATUS_OK;
    return status_fail(why, STATUS_REFUSED,
                       "the record %s: %llu MiB are free on its disk, at least %d are needed to arm", path,
                       (unsigned long long)mib, (int)RECORD_FREE_MIB_LEAST);
}

/* A text as a JSON string; malloc'ed by the caller's buffer. Codes and words only: quotes, backslashes and
 * control characters are escaped. */
static void add_member(struct buffer *out, const char *key, const char *text)
{
    static const char digits[] = "0123456789abcdef";
    (void)buffer_add(out, out->size > 1 ? ",\"" : "\"", out->size > 1 ? 2 : 1);
    (void)buffer_add(out, key, strlen(key));
    (void)buffer_add(out, "\":\"", 3);
    for (const char *at = text ? text : ""; *at; at++) {
        const unsigned char c = (unsigned char)*at;
        const char escaped[] = {'\\', 'u', '0', '0', digits[c >> 4], digits[c & 15]};
        const bool plain = c >= 0x20 && c != '"' && c != '\\' && c != 0x7f;
        (void)buffer_add(out, plain ? at : escaped, plain ? 1 : sizeof escaped);
    }
    (void)buffer_add(out, "\"", 1);
}

static void begin_payload(const struct record_session *session, struct buffer *out)
{
    char number[32], root[RECORD_HEAD_SIZE] = "";
    if (session->root) record_hex(session->root, root);
    (void)snprintf(number, sizeof number, "%llu", (unsigned long long)session->begun_s);
    (void)buffer_add(out, "{", 1);
    add_member(out, "person", session->person);
    add_member(out, "device", session->device);
    add_member(out, "kind", session->kind);
    add_member(out, "approval", session->approval);
    add_member(out, "program", session->program);
    add_member(out, "root", root);
    add_member(out, "begun_s", number);
    (void)buffer_add(out, "}", 1);
}

static enum status write_begin(struct record *record, const struct record_session *session,
                               struct message *why)
{
    struct buffer payload = {0};
    struct record_entry begin = {.kind = RECORD_BEGIN};
    begin_payload(session, &payload);
    enum status status = database_begin(&record->database, true, why);
    if (status == STATUS_OK)
        status = database_append(&record->database, &begin, payload.data, payload.size, why);
    record->session = begin.session;
    struct record_entry plan = {.session = begin.session, .kind = RECORD_PLAN};
    if (status == STATUS_OK && session->plan)
        status = database_append(&record->database, &plan, session->plan, session->plan_size, why);
    if (status == STATUS_OK) status = database_commit(&record->database, why);
    if (status != STATUS_OK) database_roll_back(&record->database);
    free(payload.data);
    return status;
}

static enum status start_writer(struct record *record, struct message *why)
{
    pthread_condattr_t monotonic;
    (void)pthread_mutex_init(&record->lock, NULL);
    (void)pthread_condattr_init(&monotonic);
    (void)pthread_condattr_setclock(&monotonic, CLOCK_MONOTONIC);
    (void)pthread_cond_init(&record->work, &monotonic);
    (void)pthread_cond_init(&record->written, NULL);
    (void)pthread_condattr_destroy(&monotonic);
    record->running = pthread_create(&record->writer, NULL, write_all, record) == 0;
    return record->running ? STATUS_OK : status_fail(why, STATUS_INTERNAL, "no thread for the record");
}

enum status record_begin_by(const struct record_means *means, const char *path,
                            const struct record_session *session, struct record **made, struct message *why)
{
    *made = NULL;
    enum status status = check_room(means, path, why);
    if (status != STATUS_OK) return status;
    struct record *record = calloc(1, sizeof *record);
    if (!record) return status_fail(why, STATUS_INTERNAL, "no memory for the record");
    status = database_open(path, means ? means->vfs : NULL, &record->database, why);
    if (status != STATUS_OK) {
        free(record);
        return status;
    }
    status = write_begin(record, session, why);
    if (status == STATUS_OK) status = start_writer(record, why);
    if (status != STATUS_OK) {
        database_close(&record->database);
        free(record);
        return status;
    }
    *made = record;
    return STATUS_OK;
}

enum status record_begin(const char *path, const struct record_session *session, struct record **record,
                         struct message *why)
{
    return record_begin_by(NULL, path, session, record, why);
}

/* What an event may be for a caller, and whether it is waited for. */
static bool event_is_known(enum record_event event, bool *synchronous)
{
    switch (event) {
#define RECORD_CASE(name, number, word, waits)                                                               \
    case name: *synchronous = waits; return true;
        RECORD_KIND_TABLE(RECORD_CASE)
#undef RECORD_CASE
    default: return false;
    }
}

static enum status failure_of(const struct record *record, struct message *why)
{
    return status_fail(why, STATUS_REFUSED, "%s", record->failure.text);
}

static void latch(struct record *record, const char *what)
{
    if (record->failed) return;
    record->failed = true;
    (void)status_fail(&record->failure, STATUS_REFUSED, "%s", what);
}

/* With the lock held: waits until what is in `filling` now is on the disk. */
static void wait_written(struct record *record)
{
    const uint64_t number = record->asked;
    record->filling.synchronous = true;
    (void)pthread_cond_signal(&record->work);
    while (record->done <= number) (void)pthread_cond_wait(&record->written, &record->lock);
}

static enum status add_event(struct record *record, enum record_event event, uint64_t at_us, const char *text,
                             bool synchronous, struct message *why)
{
    const struct item item = {.at_us = at_us, .size = strlen(text), .kind = event};
    (void)pthread_mutex_lock(&record->lock);
    struct buffer *events = &record->filling.events;
    const size_t before = events->size;
    if (!record->failed &&
        (!buffer_add(events, &item, sizeof item) || !buffer_add(events, text, item.size))) {
        events->size = before;
        latch(record, "the record: the disk does not keep up");
    }
    if (!record->failed && synchronous) wait_written(record);
    const enum status status = record->failed ? failure_of(record, why) : STATUS_OK;
    (void)pthread_mutex_unlock(&record->lock);
    return status;
}

enum status record_event(struct record *record, enum record_event event, uint64_t at_us, const char *text,
                         struct message *why)
{
    bool synchronous = false;
    const size_t size = text ? strlen(text) : 0;
    if (!event_is_known(event, &synchronous) || event == RECORD_BEGIN || event == RECORD_PLAN ||
        event == RECORD_END || event == RECORD_PULSES || event == RECORD_FORCE)
        return status_fail(why, STATUS_INTERNAL, "the record keeps no event %d", (int)event);
    if (size < 2 || size > RECORD_TEXT_MAX || text[0] != '{' || text[size - 1] != '}')
        return status_fail(why, STATUS_INTERNAL, "the record: a %s is told as a JSON object",
                           record_event_word(event));
    return add_event(record, event, at_us, text, synchronous, why);
}

static enum status add_row(struct record *record, struct buffer *rows, uint64_t *first_at_us, uint64_t at_us,
                           const uint8_t *row, size_t size)
{
    (void)pthread_mutex_lock(&record->lock);
    if (rows->size == 0) *first_at_us = at_us;
    if (!record->failed && !buffer_add(rows, row, size))
        latch(record, "the record: the disk does not keep up");
    const enum status status = record->failed ? STATUS_REFUSED : STATUS_OK;
    (void)pthread_mutex_unlock(&record->lock);
    return status;
}

enum status record_pulse(struct record *record, uint64_t at_us, unsigned channel, unsigned duration_us,
                         uint32_t current_ua, uint32_t measured_ua)
{
    const struct record_pulse_row row = {.at_us = at_us,
                                         .channel = (uint8_t)channel,
                                         .duration_us = (uint16_t)duration_us,
                                         .current_ua = current_ua,
                                         .measured_ua = measured_ua};
    uint8_t octets[RECORD_PULSE_OCTETS];
    record_pulse_encode(&row, octets);
    return add_row(record, &record->filling.pulses, &record->filling.pulses_at_us, at_us, octets,
                   sizeof octets);
}

enum status record_force(struct record *record, uint64_t at_us, double force_n)
{
    const struct record_force_row row = {.at_us = at_us, .force_n = force_n};
    uint8_t octets[RECORD_FORCE_OCTETS];
    record_force_encode(&row, octets);
    return add_row(record, &record->filling.forces, &record->filling.forces_at_us, at_us, octets,
                   sizeof octets);
}

bool record_is_sound(struct record *record, struct message *why)
{
    (void)pthread_mutex_lock(&record->lock);
    const bool sound = !record->failed;
    if (!sound) (void)failure_of(record, why);
    (void)pthread_mutex_unlock(&record->lock);
    return sound;
}

static void close_record(struct record *record)
{
    (void)pthread_mutex_lock(&record->lock);
    record->closing = true;
    (void)pthread_cond_signal(&record->work);
    (void)pthread_mutex_unlock(&record->lock);
    (void)pthread_join(record->writer, NULL);
    database_close(&record->database);
    (void)pthread_cond_destroy(&record->work);
    (void)pthread_cond_destroy(&record->written);
    (void)pthread_mutex_destroy(&record->lock);
    batch_free(&record->filling);
    batch_free(&record->writing);
    free(record);
}

enum status record_end(struct record *record, char head[RECORD_HEAD_SIZE], struct message *why)
{
    enum status status = add_event(record, RECORD_END, 0, "{}", true, why);
    if (status == STATUS_OK) record_hex(record->database.chain, head); /* the writer waits: nothing is left */
    close_record(record);
    return status;
}

void record_abandon(struct record *record)
{
    if (record) close_record(record);
}
