/* What all documents share: files read whole with their digest, files written whole, text being made, numbers
 * and days. The goal of this code: a file is read once and nothing on disk is ever half written or lost. */
#include "core/document/document.h"

#include "core/digest/blake2b.h"
#include <errno.h>
#include <fcntl.h>
#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/stat.h>
#include <unistd.h>

enum { FILE_SIZE_MAX = 256 << 20 };

static const char *const formats[DOCUMENT_KINDS] = {
    "pulsewright-profile-1", "pulsewright-demand-1",     "pulsewright-stimulator-1", "pulsewright-hookup-1",
    "pulsewright-train-1",   "pulsewright-recordings-1", "pulsewright-plan-1"};

const char *document_kind_format(enum document_kind kind)
{
    return formats[kind];
}

static bool leap(int year)
{
    return (year % 4 == 0 && year % 100 != 0) || year % 400 == 0;
}

bool date_read(const char *text, struct date *date)
{
    static const int lengths[12] = {31, 28, 31, 30, 31, 30, 31, 31, 30, 31, 30, 31};
    static const char shape[] = "dddd-dd-dd";
    if (strlen(text) != 10) return false;
    for (int i = 0; i < 10; i++)
        if (shape[i] == 'd' ? text[i] < '0' || text[i] > '9' : text[i] != '-') return false;
    const int year = atoi(text), month = atoi(text + 5), day = atoi(text + 8);
    if (year < 1900 || month < 1 || month > 12 || day < 1) return false;
    if (day > lengths[month - 1] + (month == 2 && leap(year) ? 1 : 0)) return false;
    *date = (struct date){year, month, day};
    return true;
}

/* Days by the count of leap years in the Gregorian calendar. */
long date_days(struct date date)
{
    static const int before[12] = {0, 31, 59, 90, 120, 151, 181, 212, 243, 273, 304, 334};
    const long years = date.year - 1;
    const long leaps = years / 4 - years / 100 + years / 400;
    return years * 365 + leaps + before[date.month - 1] + (date.month > 2 && leap(date.year) ? 1 : 0) +
           date.day - 1 - 719162;
}

static enum status read_descriptor(int file, struct document_bytes *bytes, struct message *why)
{
    struct stat about;
    if (fstat(file, &about) != 0 || S_ISDIR(about.st_mode))
        return status_fail(why, STATUS_DOCUMENT, "%s: is no file", bytes->path);
    size_t capacity = about.st_size > 0 ? (size_t)about.st_size + 1 : 65536;
    if (capacity > FILE_SIZE_MAX)
        return status_fail(why, STATUS_DOCUMENT, "%s: holds more than %d MiB", bytes->path,
                           FILE_SIZE_MAX >> 20);
    bytes->data = malloc(capacity + 1);
    while (bytes->data) {
        const ssize_t got = read(file, bytes->data + bytes->size, capacity - bytes->size);
        if (got == 0) return STATUS_OK;
        if (got < 0 && errno == EINTR) continue;
        if (got < 0)
            return status_fail(why, STATUS_DOCUMENT, "%s: can not be read: %s", bytes->path, strerror(errno));
        bytes->size += (size_t)got;
        if (bytes->size < capacity) continue;
        if (capacity >= FILE_SIZE_MAX)
            return status_fail(why, STATUS_DOCUMENT, "%s: holds more than %d MiB", bytes->path,
                               FILE_SIZE_MAX >> 20);
        capacity *= 2;
        char *grown = realloc(bytes->data, capacity + 1);
        if (!grown) break;
        bytes->data = grown;
    }
    return status_fail(why, STATUS_INTERNAL, "%s: no memory", bytes->path);
}

enum status document_read_bytes(const char *path, struct document_bytes *bytes, struct message *why)
{
    *bytes = (struct document_bytes){0};
    if (strlen(path) >= sizeof bytes->path)
        return status_fail(why, STATUS_DOCUMENT, "%.80s..: is too long a path", path);
    (void)snprintf(bytes->path, sizeof bytes->path, "%s", path);
    const int file = open(path, O_RDONLY | O_CLOEXEC);
    if (file < 0)
        return status_fail(why, STATUS_DOCUMENT, "%s: can not be opened: %s", path, strerror(errno));
    const enum status status = read_descriptor(file, bytes, why);
    (void)close(file);
    if (status != STATUS_OK) {
        document_bytes_free(bytes);
        return status;
    }
    bytes->data[bytes->size] = '\0';
    document_bytes_digest(bytes);
    return STATUS_OK;
}

void document_bytes_digest(struct document_bytes *bytes)
{
    blake2b(bytes->digest, sizeof bytes->digest, bytes->data, bytes->size);
}

void document_bytes_free(struct document_bytes *bytes)
{
    free(bytes->data);
    bytes->data = NULL;
    bytes->size = 0;
}

/* Looks at the first line that is neither empty nor a comment nor `---`. */
enum status document_kind_of(const struct document_bytes *bytes, enum document_kind *kind,
                             struct message *why)
{
    int line = 1;
    for (const char *c = bytes->data; c && *c; line++) {
        const char *end = strchr(c, '\n');
        size_t length = end ? (size_t)(end - c) : strlen(c);
        if (line == 1 && length >= 3 && memcmp(c, "\xEF\xBB\xBF", 3) == 0) {
            c += 3;
            length -= 3;
        }
        if (length == 0 || c[0] == '#' || c[0] == '\r' || c[0] == '%' ||
            (length >= 3 && memcmp(c, "---", 3) == 0)) {
            c = end ? end + 1 : NULL;
            continue;
        }
        for (int k = 0; k < DOCUMENT_KINDS; k++) {
            char wanted[64];
            const int size = snprintf(wanted, sizeof wanted, "format: %s", formats[k]);
            if (length < (size_t)size || memcmp(c, wanted, (size_t)size) != 0) continue;
            if (length > (size_t)size && !strchr(" \r\t#", c[size])) continue;
            *kind = (enum document_kind)k;
            return STATUS_OK;
        }
        return status_fail(
            why, STATUS_DOCUMENT,
            "%s:%d:1: format: holds %.*s, may hold format: pulsewright-KIND-1, KIND one of profile, demand, "
            "stimulator, hookup, train, recordings, plan",
            bytes->path, line, (int)(length > 60 ? 60 : length), c);
    }
    return status_fail(why, STATUS_DOCUMENT,
                       "%s:1:1: format: is absent, the first line may hold format: pulsewright-KIND-1",
                       bytes->path);
}

static bool write_all(int file, const char *data, size_t size)
{
    while (size) {
        const ssize_t put = write(file, data, size);
        if (put < 0 && errno == EINTR) continue;
        if (put <= 0) return false;
        data += put;
        size -= (size_t)put;
    }
    return true;
}

static void sync_folder(const char *path)
{
    char folder[PATH_SIZE];
    (void)snprintf(folder, sizeof folder, "%s", path);
    char *slash = strrchr(folder, '/');
    if (slash)
        slash[slash == folder ? 1 : 0] = '\0';
    else
        (void)snprintf(folder, sizeof folder, ".");
    const int file = open(folder, O_RDONLY | O_DIRECTORY | O_CLOEXEC);
    if (file < 0) return;
    (void)fsync(file);
    (void)close(file);
}

enum status document_write_file(const char *path, const void *data, size_t size, bool replace,
                                struct message *why)
{
    char temporary[PATH_SIZE + 32], old[PATH_SIZE + 4];
    struct stat about;
    if (strlen(path) == 0 || strlen(path) >= PATH_SIZE)
        return status_fail(why, STATUS_USAGE, "\"%.80s\" is no usable path", path);
    const bool exists = lstat(path, &about) == 0;
    if (exists && !S_ISREG(about.st_mode) &&
        !S_ISLNK(about.st_mode)) { /* a pipe or a device: written as it is */
        const int sink = open(path, O_WRONLY | O_CLOEXEC);
        const bool done = sink >= 0 && write_all(sink, data, size);
        if (sink >= 0) (void)close(sink);
        return done ? STATUS_OK
                    : status_fail(why, STATUS_USAGE, "%s: can not be written: %s", path, strerror(errno));
    }
    if (exists && !replace)
        return status_fail(why, STATUS_USAGE,
                           "%s is there already; --replace writes anew and keeps the old one as %s.1", path,
                           path);
    (void)snprintf(temporary, sizeof temporary, "%s.new-%ld", path, (long)getpid());
    const int file = open(temporary, O_WRONLY | O_CREAT | O_EXCL | O_CLOEXEC, 0644);
    if (file < 0) return status_fail(why, STATUS_USAGE, "%s: can not be written: %s", path, strerror(errno));
    const bool written = write_all(file, data, size) && fsync(file) == 0;
    const bool closed = close(file) == 0;
    (void)snprintf(old, sizeof old, "%s.1", path);
    if (!written || !closed || (exists && rename(path, old) != 0)) {
        const int reason = errno;
        (void)unlink(temporary);
        return status_fail(why, STATUS_USAGE, "%s: can not be written: %s", path, strerror(reason));
    }
    /* link and not rename: a file that appeared meanwhile is not overwritten */
    if (link(temporary, path) != 0 && (errno == EEXIST || rename(temporary, path) != 0)) {
        const int reason = errno;
        (void)unlink(temporary);
        return status_fail(why, STATUS_USAGE, "%s: can not be written: %s", path, strerror(reason));
    }
    (void)unlink(temporary);
    sync_folder(path);
    return STATUS_OK;
}

/* A text of a few kilobytes: where there is no memory for it nothing sensible is left to do, so it ends
 * loudly. */
void text_out_print(struct text_out *out, const char *format, ...)
{
    char *made = NULL;
    va_list list;
    va_start(list, format);
    const int length = vasprintf(&made, format, list);
    va_end(list);
    if (length < 0) abort();
    const size_t needed = out->size + (size_t)length + 1;
    if (needed > out->capacity) {
        char *grown = realloc(out->data, 2 * needed + 256);
        if (!grown) abort();
        out->data = grown;
        out->capacity = 2 * needed + 256;
    }
    memcpy(out->data + out->size, made, (size_t)length + 1);
    out->size += (size_t)length;
    free(made);
}

void text_out_free(struct text_out *out)
{
    free(out->data);
    *out = (struct text_out){0};
}

char *number_text(double value, char buffer[32])
{
    char text[32] = "";
    if (fabs(value) < 1e15 && !(value < floor(value)) && !(value > floor(value))) { /* 60 and not 6e+01 */
        (void)snprintf(buffer, 32, "%.0f", value);
        return buffer;
    }
    for (int digits = 1; digits <= 17; digits++) {
        (void)snprintf(text, sizeof text, "%.*g", digits, value);
        const double back = strtod(text, NULL);
        if (!(back < value) && !(back > value)) break;
    }
    memcpy(buffer, text, sizeof text);
    return buffer;
}
