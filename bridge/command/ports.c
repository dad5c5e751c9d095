/* `pulsewright-bridge ports`: what a stimulator may be plugged into. */
#include "bridge/command/commands.h"
#include "bridge/link/link.h"

#include <stdio.h>

static void print_port(void *context, const char *address, const char *description)
{
    (*(unsigned *)context)++;
    printf("%-28s %s\n", address, description);
}

static enum status run(const struct arguments *arguments)
{
    struct message why = {""};
    unsigned count = 0;
    const enum status status = link_list_ports(print_port, &count, &why);
    if (status != STATUS_OK) return command_fail(arguments, status, "%s", why.text);
    if (count == 0) fprintf(stderr, "no serial port on this computer\n");
    return STATUS_OK;
}

static const struct option options[] = {{NULL, NULL, NULL}};
const struct command command_ports = {.name = "ports",
                                      .usage = "",
                                      .summary = "the serial ports of this computer, as addresses for --to",
                                      .options = options,
                                      .run = run};
