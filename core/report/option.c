/* Options from one table a command. The goal of this code: a mistyped option never runs, and help can not
 * differ from what is taken. */
#include "core/report/option.h"

#include <errno.h>
#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

const char *const option_quantities =
    "Quantities:\n"
    "  duration_us  phase duration (pulse width): the first phase only, in microseconds\n"
    "  current_ma   peak of one phase, in milliamperes\n"
    "  pps          pulses a second (pairs a second in a train of pairs)\n"
    "  hold_ms      from the end of ramp_up; no pulse stands at its end\n"
    "  rest_ms      from the last pulse to the next first pulse\n"
    "  force        at time t of a trace it is F(t - delay) + tone, as a recording shows it\n"
    "\n"
    "This is research software, no medical device. It ends in current through a person: local codes and "
    "licensed\n"
    "practice come first, strength is found from zero, and the emergency stop is a switch in series with the "
    "output.\n";

static const struct option *find_option(const struct command *command, const char *name)
{
    for (const struct option *option = command->options; option && option->name; option++)
        if (strcmp(option->name, name) == 0) return option;
    return NULL;
}

static void print_command_help(const struct program *program, const struct command *command)
{
    printf("usage: %s%s%s %s\n\n%s\n", program->name, command->name[0] ? " " : "", command->name,
           command->usage, command->summary);
    if (command->help) printf("\n%s\n", command->help);
    printf("\nOptions:\n");
    for (const struct option *option = command->options; option && option->name; option++) {
        char left[64];
        (void)snprintf(left, sizeof left, "%s%s%s", option->name, option->value ? " " : "",
                       option->value ? option->value : "");
        printf("  %-24s %s\n", left, option->help);
    }
    printf("  %-24s %s\n  %-24s %s\n", "--help", "this text", "--version", "name and version");
    printf("\nExit: 0 done, 2 wrong usage, 3 the answer is no, 4 bad document, 5 device or link, 6 internal "
           "error.\n");
    if (program->epilogue) printf("\n%s", program->epilogue);
}

static void print_program_help(const struct program *program)
{
    printf("usage: %s COMMAND ...\n\n%s\n\nCommands (each has --help):\n", program->name, program->summary);
    for (const struct command *const *command = program->commands; *command; command++)
        if (!(*command)->hidden) printf("  %-10s %s\n", (*command)->name, (*command)->summary);
    printf("\nExit: 0 done, 2 wrong usage, 3 the answer is no, 4 bad document, 5 device or link, 6 internal "
           "error.\n");
    if (program->epilogue) printf("\n%s", program->epilogue);
}

static int usage_error(const struct program *program, const struct command *command, const char *what,
                       const char *which)
{
    if (command)
        fprintf(stderr, "%s %s: %s%s\nusage: %s %s %s\n", program->name, command->name, what, which,
                program->name, command->name, command->usage);
    else
        fprintf(stderr, "%s: %s%s (see %s --help)\n", program->name, what, which, program->name);
    return STATUS_USAGE;
}

/* Takes one option at argv[*at]; both "--name value" and "--name=value". 0, or the exit code. */
static int take_option(struct arguments *arguments, int argc, char **argv, int *at)
{
    const struct program *program = arguments->program;
    const struct command *command = arguments->command;
    char name[64];
    const char *equals = argv[*at][1] == '-' ? strchr(argv[*at], '=') : NULL;
    const size_t length = equals ? (size_t)(equals - argv[*at]) : strlen(argv[*at]);
    if (length >= sizeof name) return usage_error(program, command, "unknown option ", argv[*at]);
    memcpy(name, argv[*at], length);
    name[length] = '\0';
    const struct option *option = find_option(command, name);
    if (!option) return usage_error(program, command, "unknown option ", name);
    if (arguments->values == ARGUMENTS_MAX)
        return usage_error(program, command, "too many options at ", name);
    const char *value = "";
    if (option->value && equals) {
        value = equals + 1;
    } else if (option->value) {
        if (*at + 1 >= argc) return usage_error(program, command, "a value is missing after ", name);
        value = argv[++*at];
    } else if (equals) {
        return usage_error(program, command, "no value goes with ", name);
    }
    arguments->option_name[arguments->values] = option->name;
    arguments->option_value[arguments->values++] = value;
    return 0;
}

static int run_command(const struct program *program, const struct command *command, int argc, char **argv)
{
    struct arguments arguments = {.program = program, .command = command};
    bool options_over = false;
    for (int at = 0; at < argc; at++) {
        const char *word = argv[at];
        if (!options_over && strcmp(word, "--") == 0) {
            options_over = true;
        } else if (!options_over && strcmp(word, "--help") == 0) {
            print_command_help(program, command);
            return STATUS_OK;
        } else if (!options_over && strcmp(word, "--version") == 0) {
            printf("%s\n", program->version);
            return STATUS_OK;
        } else if (!options_over && word[0] == '-' && word[1] != '\0') {
            const int failed = take_option(&arguments, argc, argv, &at);
            if (failed) return failed;
        } else {
            if (arguments.positionals == ARGUMENTS_MAX)
                return usage_error(program, command, "too many arguments at ", word);
            arguments.positional[arguments.positionals++] = word;
        }
    }
    if (arguments.positionals < command->positional_least)
        return usage_error(program, command, "an argument is missing", "");
    if (arguments.positionals > command->positional_most)
        return usage_error(program, command,
                           "one argument too many: ", arguments.positional[command->positional_most]);
    int code = (int)command->run(&arguments);
    if (fflush(stdout) != 0 || ferror(stdout)) {
        fprintf(stderr, "%s %s: standard output can not be written: %s\n", program->name, command->name,
                strerror(errno));
        if (code == STATUS_OK) code = STATUS_INTERNAL;
    }
    return code;
}

int command_main(const struct program *program, const struct command *command, int argc, char **argv)
{
    return run_command(program, command, argc - 1, argv + 1);
}

int program_main(const struct program *program, int argc, char **argv)
{
    if (argc < 2) {
        (void)usage_error(program, NULL, "which command?", "");
        return STATUS_USAGE;
    }
    if (strcmp(argv[1], "--help") == 0 || strcmp(argv[1], "help") == 0) {
        print_program_help(program);
        return STATUS_OK;
    }
    if (strcmp(argv[1], "--version") == 0) {
        printf("%s\n", program->version);
        return STATUS_OK;
    }
    for (const struct command *const *command = program->commands; *command; command++)
        if (strcmp((*command)->name, argv[1]) == 0) return run_command(program, *command, argc - 2, argv + 2);
    return usage_error(program, NULL, "unknown command ", argv[1]);
}

const char *argument(const struct arguments *arguments, const char *name)
{
    const char *value = NULL;
    for (int i = 0; i < arguments->values; i++)
        if (strcmp(arguments->option_name[i], name) == 0) value = arguments->option_value[i];
    return value;
}

bool argument_given(const struct arguments *arguments, const char *name)
{
    return argument(arguments, name) != NULL;
}

enum status argument_number(const struct arguments *arguments, const char *name, double least, double most,
                            double *value)
{
    const char *text = argument(arguments, name);
    if (!text) return STATUS_OK;
    char *end = NULL;
    const double number = strtod(text, &end);
    if (end == text || *end != '\0' || !isfinite(number))
        return command_fail(arguments, STATUS_USAGE, "%s holds \"%s\", which is no number", name, text);
    if (number < least || number > most)
        return command_fail(arguments, STATUS_USAGE, "%s holds %s, it may hold %g to %g", name, text, least,
                            most);
    *value = number;
    return STATUS_OK;
}

enum status argument_pair(const struct arguments *arguments, const char *name, double *a, double *b)
{
    const char *text = argument(arguments, name);
    if (!text) return STATUS_OK;
    char *end = NULL, *end_b = NULL;
    const double first = strtod(text, &end);
    if (end == text || *end != ',')
        return command_fail(arguments, STATUS_USAGE, "%s holds \"%s\", it may hold two numbers A,B", name,
                            text);
    const double second = strtod(end + 1, &end_b);
    if (end_b == end + 1 || *end_b != '\0' || !isfinite(first) || !isfinite(second))
        return command_fail(arguments, STATUS_USAGE, "%s holds \"%s\", it may hold two numbers A,B", name,
                            text);
    *a = first;
    *b = second;
    return STATUS_OK;
}

enum status command_fail(const struct arguments *arguments, enum status status, const char *format, ...)
{
    va_list list;
    va_start(list, format);
    fprintf(stderr, "%s%s%s: ", arguments->program->name, arguments->command->name[0] ? " " : "",
            arguments->command->name);
    (void)vfprintf(stderr, format, list);
    fputc('\n', stderr);
    va_end(list);
    return status;
}
