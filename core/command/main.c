/* The program `pulsewright`: documents in, figures and plans out. It links nothing that could open a port. */
#include "core/command/commands.h"

int main(int argc, char **argv)
{
#define COMMAND_ADDRESS(name) &command_##name,
    static const struct command *const commands[] = {PULSEWRIGHT_COMMANDS(COMMAND_ADDRESS) NULL};
#undef COMMAND_ADDRESS
    struct program program = {.name = "pulsewright",
                              .summary = "Plans pulse trains for functional electrical stimulation.",
                              .version = "pulsewright " PULSEWRIGHT_VERSION,
                              .commands = commands,
                              .epilogue = option_quantities};
    return program_main(&program, argc, argv);
}
