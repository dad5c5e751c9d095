/* Options: what every command of every program takes from its command line, from one table a command;
 * `--help`, `--version` and the messages for wrong usage come from the same table. Results go to stdout,
 * messages to stderr. */
#ifndef PULSEWRIGHT_CORE_REPORT_OPTION_H
#define PULSEWRIGHT_CORE_REPORT_OPTION_H
#include "core/status/status.h"
#include <stdbool.h>
#include <stddef.h>

struct option {
    const char *name;  /* "--muscle", or "-o" */
    const char *value; /* what stands for its value in help ("M"); NULL: a switch */
    const char *help;  /* one line */
};

struct arguments;

struct command {
    const char *name;
    const char *usage;   /* after the command's name: "PROFILE --muscle M (--pulses FILE | --train FILE)" */
    const char *summary; /* one line for the program's list */
    const char *help;    /* further text for --help; NULL: none */
    const struct option *options; /* ended by a NULL name */
    int positional_least, positional_most;
    enum status (*run)(const struct arguments *arguments);
    bool hidden; /* not in the list yet */
};

struct program {
    const char *name, *summary;
    const char *version;                   /* text after the name; may say TEST BUILD */
    const struct command *const *commands; /* ended by NULL */
    const char *epilogue;                  /* the quantities and cautions, shown with every --help */
};

enum { ARGUMENTS_MAX = 256 };
struct arguments {
    const struct program *program;
    const struct command *command;
    int positionals;
    const char *positional[ARGUMENTS_MAX];
    int values;
    const char *option_name[ARGUMENTS_MAX];
    const char *option_value[ARGUMENTS_MAX]; /* "" for a switch */
};

/* Parses, answers --help and --version, runs; returns the exit code. */
int program_main(const struct program *program, int argc, char **argv);
/* The same for a program without commands: `command` has an empty name. */
int command_main(const struct program *program, const struct command *command, int argc, char **argv);
/* Value of an option, NULL where it was not given (the last where it was given twice). */
const char *argument(const struct arguments *arguments, const char *name);
bool argument_given(const struct arguments *arguments, const char *name);
/* A number in a range; `*value` keeps what it holds where the option was not given. Wrong: STATUS_USAGE,
 * message on stderr. */
enum status argument_number(const struct arguments *arguments, const char *name, double least, double most,
                            double *value);
/* "A,B" */
enum status argument_pair(const struct arguments *arguments, const char *name, double *a, double *b);
/* Prints "pulsewright COMMAND: TEXT" on stderr and returns status. */
__attribute__((format(printf, 3, 4))) enum status command_fail(const struct arguments *arguments,
                                                               enum status status, const char *format, ...);

/* "Quantities, said once": phase duration, current, pps, hold, rest. Also the usual caution. For `epilogue`.
 */
extern const char *const option_quantities;
/* What every output carries until signed. */
#define NOT_SIGNED_TEXT "NOT SIGNED: no clinician has approved these pulses. Not for use on a person."

#endif
