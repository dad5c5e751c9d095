/* The commands of `pulsewright-bridge`, one file each. */
#ifndef PULSEWRIGHT_BRIDGE_COMMAND_COMMANDS_H
#define PULSEWRIGHT_BRIDGE_COMMAND_COMMANDS_H
#include "core/report/option.h"

/* X(name): command_NAME in NAME.c. The order is that of the work. */
#define BRIDGE_COMMANDS(X) X(site) X(enrol) X(sign) X(verify) X(twin) X(ports) X(stream) X(sessions) X(export)

#define COMMAND_DECLARE(name) extern const struct command command_##name;
BRIDGE_COMMANDS(COMMAND_DECLARE)
#undef COMMAND_DECLARE

#endif
