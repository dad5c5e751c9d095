/* The program `pulsewright-bridge`: signs plans, streams them to a stimulator or its twin, keeps the record.
 */
#include "bridge/command/commands.h"

#ifdef PULSEWRIGHT_TEST_BUILD
#define BUILD_NOTE " TEST BUILD"
#else
#define BUILD_NOTE ""
#endif

int main(int argc, char **argv)
{
#define COMMAND_ADDRESS(name) &command_##name,
    static const struct command *const commands[] = {BRIDGE_COMMANDS(COMMAND_ADDRESS) NULL};
#undef COMMAND_ADDRESS
    struct program program = {.name = "pulsewright-bridge",
                              .summary =
                                  "Signs plans, streams them to a stimulator or its twin, keeps the record.",
                              .version = "pulsewright-bridge " PULSEWRIGHT_VERSION BUILD_NOTE,
                              .commands = commands,
                              .epilogue = option_quantities};
    return program_main(&program, argc, argv);
}
