/* The commands of `pulsewright`, one file each. */
#ifndef PULSEWRIGHT_CORE_COMMAND_COMMANDS_H
#define PULSEWRIGHT_CORE_COMMAND_COMMANDS_H
#include "core/report/option.h"

/* X(name): command_NAME in NAME.c. The order is that of the work. */
#define PULSEWRIGHT_COMMANDS(X)                                                                              \
    X(begin)                                                                                                 \
    X(check)                                                                                                 \
    X(predict)                                                                                               \
    X(curves)                                                                                                \
    X(plan)                                                                                                  \
    X(pulses)                                                                                                \
    X(sheet) X(recount)

#define COMMAND_DECLARE(name) extern const struct command command_##name;
PULSEWRIGHT_COMMANDS(COMMAND_DECLARE)
#undef COMMAND_DECLARE

#endif
