/* The one table of outcomes: every call that can fail returns one, every program exits with its number. */
#ifndef PULSEWRIGHT_CORE_STATUS_H
#define PULSEWRIGHT_CORE_STATUS_H
#include <stdarg.h>
#include <stddef.h>

/* name, exit code, what it means to a person */
#define STATUS_TABLE(X)                                                                                      \
    X(STATUS_OK, 0, "done")                                                                                  \
    X(STATUS_USAGE, 2, "wrong usage")                                                                        \
    X(STATUS_REFUSED, 3, "the answer is no")                                                                 \
    X(STATUS_DOCUMENT, 4, "bad document")                                                                    \
    X(STATUS_DEVICE, 5, "device or link")                                                                    \
    X(STATUS_INTERNAL, 6, "internal error")

enum status {
#define STATUS_ENUM(name, code, text) name = code,
    STATUS_TABLE(STATUS_ENUM)
#undef STATUS_ENUM
};

enum { MESSAGE_SIZE = 1024 };

/* Why a call failed, in words for a person: it names the thing, the value and what would be right. No newline at its end. */
struct message {
    char text[MESSAGE_SIZE];
};

/* Text of a status ("bad document"); never NULL. */
const char *status_text(enum status status);

/* Writes the message (`why` may be NULL) and returns `status`, so that a failing call is one line. */
__attribute__((format(printf, 3, 4))) enum status status_fail(struct message *why, enum status status, const char *format, ...);

#endif
