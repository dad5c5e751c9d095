/* Outcomes and their texts. The goal of this code: one line at the place of failure, one text for each outcome. */
#include "core/status/status.h"

#include <stdio.h>

const char *status_text(enum status status)
{
    switch (status) {
#define STATUS_CASE(name, code, text)                                                                        \
    case name: return text;
        STATUS_TABLE(STATUS_CASE)
#undef STATUS_CASE
    }
    return "unknown outcome";
}

enum status status_fail(struct message *why, enum status status, const char *format, ...)
{
    if (why) {
        va_list list;
        va_start(list, format);
        (void)vsnprintf(why->text, sizeof why->text, format, list);
        va_end(list);
    }
    return status;
}
