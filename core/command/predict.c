/* pulsewright predict: pulses or a train through a muscle of a profile. The
 * goal of this code: one line of command from documents to a trace, its figures
 * and its picture; what was assumed is said, a bound that was reached is warned
 * of. */
#include "core/command/commands.h"

#include "core/command/muscle_input.h"
#include "core/predict/predict.h"
#include "core/report/json.h"

#ifdef PULSEWRIGHT_FIGURES
#include "core/figure/figure.h"
#endif

#include <math.h>
#include <stdio.h>
#include <stdlib.h>

static const struct option options[] = {
    {"--muscle", "M", "the muscle (may be left out where the profile has one)"},
    {"--pulses", "FILE", "pulses: CSV with time_ms,duration_us,current_ma"},
    {"--train", "FILE", "a train document"},
    {"--stimulator", "FILE",
     "compile the train on this stimulator's steps; without it nothing is "
     "rounded"},
    {"--hookup", "FILE", "which channel drives what; only checked here"},
    {"--motion", "FILE", "CSV with time_ms,relative_length,relative_velocity: the muscle moves"},
    {"--step-ms", "X", "samples each X ms (1)"},
    {"--until-ms", "X", "last sample (last pulse + 1000)"},
    {"--window-ms", "A,B",
     "where mean and ripple are taken (the first contraction's hold; else the "
     "second half)"},
    {"-o", "TRACE.csv", "write the trace"},
    {"--replace", NULL, "write over existing files, keeping the old ones as NAME.1"},
    {"--picture", "FILE", "draw pulses, activation and force (.png, .svg, .pdf)"},
    {"--exact", NULL, "force within 1e-7 of its peak, capacity within 1e-8 (else 1e-4, 1e-5)"},
    {"--json", NULL, "figures for machines"},
    {NULL, NULL, NULL},
};

static void print_json(const struct trace_summary *summary, const struct trace *trace)
{
    struct json json;
    json_begin(&json, stdout);
    json_number(&json, "peak_n", summary->peak_n);
    json_number(&json, "time_to_peak_ms", summary->time_to_peak_ms);
    json_number(&json, "half_relaxation_ms", summary->half_relaxation_ms);
    json_number(&json, "mean_n", summary->mean_n);
    json_number(&json, "ripple_percent", summary->ripple_percent);
    json_number(&json, "fusion_index", summary->fusion_index);
    json_number(&json, "force_time_integral_n_s", summary->force_time_integral_n_s);
    json_number(&json, "capacity_end", summary->capacity_end);
    json_number(&json, "potentiation_end", summary->potentiation_end);
    json_number(&json, "force_remaining_20_end", summary->force_remaining_20_end);
    json_number(&json, "force_remaining_50_end", summary->force_remaining_50_end);
    json_array(&json, "window_ms");
    json_number(&json, NULL, summary->window_ms[0]);
    json_number(&json, NULL, summary->window_ms[1]);
    json_array_end(&json);
    json_bool(&json, "bound_A", trace->bound_A);
    json_bool(&json, "bound_tau1", trace->bound_tau1);
    json_end(&json);
}

/* One line of figures; what can not be measured is left out. */
static void print_line(const char *label, double value, const char *unit, int digits)
{
    if (isfinite(value)) printf("%-26s %.*f %s\n", label, digits, value, unit);
}

static void print_text(const struct trace_summary *summary)
{
    print_line("peak", summary->peak_n, "N", 2);
    print_line("time to peak", summary->time_to_peak_ms, "ms after the first pulse", 2);
    print_line("half relaxation", summary->half_relaxation_ms, "ms", 2);
    printf("%-26s %.2f to %.2f ms\n", "window", summary->window_ms[0], summary->window_ms[1]);
    print_line("  mean", summary->mean_n, "N", 2);
    print_line("  ripple", summary->ripple_percent, "%", 2);
    print_line("  fusion index", summary->fusion_index, "", 3);
    print_line("force-time integral", summary->force_time_integral_n_s, "N s", 3);
    print_line("capacity at the end", 100 * summary->capacity_end, "%", 2);
    print_line("potentiation at the end", 100 * summary->potentiation_end, "%", 2);
    print_line("remaining force, 20 pps", 100 * summary->force_remaining_20_end, "%", 2);
    print_line("remaining force, 50 pps", 100 * summary->force_remaining_50_end, "%", 2);
}

#ifdef PULSEWRIGHT_FIGURES
static void draw_score(cairo_t *cairo, double width, double height, const void *score)
{
    const struct figure_style style = {.approval = NOT_SIGNED_TEXT, .dark = false, .scale = 1};
    figure_score_draw(cairo, width, height, score, &style);
}

static enum status draw(const char *path, const struct muscle_input *input, const struct trace *trace,
                        const struct trace_summary *summary, bool replace, struct message *why)
{
    const double none = (double)NAN;
    const struct figure_score score = {.pulses = input->pulses,
                                       .pulse_count = input->count,
                                       .trace = trace,
                                       .from_ms = 0,
                                       .to_ms = trace->time_ms[trace->samples - 1],
                                       .target_n = none,
                                       .tolerance_percent = none,
                                       .hold_from_ms = summary->window_ms[0],
                                       .hold_to_ms = summary->window_ms[1],
                                       .cursor_ms = none,
                                       .title = input->muscle->name};
    return figure_write(path, 900, 600, draw_score, &score, replace, why);
}
#else
static enum status draw(const char *path, const struct muscle_input *input, const struct trace *trace,
                        const struct trace_summary *summary, bool replace, struct message *why)
{
    (void)input;
    (void)trace;
    (void)summary;
    (void)replace;
    return status_fail(why, STATUS_USAGE, "built without figures: %s can not be drawn", path);
}
#endif

static void warn_bounds(const struct trace *trace)
{
    if (trace->bound_A)
        fprintf(stderr, "warning: A reached 0 in some of the muscle: the model "
                        "says no more about how far it tires\n");
    if (trace->bound_tau1)
        fprintf(stderr, "warning: tau1 reached 5 times its rest value in some of "
                        "the muscle and was held there\n");
}

/* Writes and prints what was asked for. */
static enum status report(const struct arguments *arguments, const struct muscle_input *input,
                          const struct trace *trace, const struct trace_summary *summary, struct message *why)
{
    const bool replace = argument_given(arguments, "--replace");
    enum status status = STATUS_OK;
    warn_bounds(trace);
    if (argument_given(arguments, "-o")) {
        struct text_out out = {0};
        trace_print(trace, &out);
        status = document_write_file(argument(arguments, "-o"), out.data, out.size, replace, why);
        text_out_free(&out);
    }
    if (status == STATUS_OK && argument_given(arguments, "--picture"))
        status = draw(argument(arguments, "--picture"), input, trace, summary, replace, why);
    if (status != STATUS_OK) return status;
    if (argument_given(arguments, "--json"))
        print_json(summary, trace);
    else
        print_text(summary);
    return STATUS_OK;
}

static enum status run(const struct arguments *arguments)
{
    const double none = (double)NAN;
    struct message why = {.text = ""};
    struct trace_options wanted = {.exact = argument_given(arguments, "--exact"),
                                   .step_ms = 1,
                                   .until_ms = none,
                                   .window_from_ms = none,
                                   .window_to_ms = none};
    enum status status = argument_number(arguments, "--step-ms", 1e-3, 1e6, &wanted.step_ms);
    if (status == STATUS_OK) status = argument_number(arguments, "--until-ms", 0, 1e9, &wanted.until_ms);
    if (status == STATUS_OK)
        status = argument_pair(arguments, "--window-ms", &wanted.window_from_ms, &wanted.window_to_ms);
    if (status != STATUS_OK) return status;
    if (argument_given(arguments, "--pulses") == argument_given(arguments, "--train"))
        return command_fail(arguments, STATUS_USAGE, "either --pulses FILE or --train FILE is needed");

    struct muscle_input input;
    struct trace trace = {0};
    struct trace_summary summary;
    status = muscle_input_load(arguments, &input, &why);
    if (status == STATUS_OK && !argument_given(arguments, "--window-ms") && isfinite(input.hold_ms[0])) {
        wanted.window_from_ms = input.hold_ms[0];
        wanted.window_to_ms = input.hold_ms[1];
    }
    wanted.same_period = input.same_period;
    if (status == STATUS_OK)
        status = predict_trace(&input.muscle->parameters, input.pulses, input.count,
                               input.has_motion ? &input.motion : NULL, &wanted, &trace, &summary, &why);
    if (status == STATUS_OK) status = report(arguments, &input, &trace, &summary, &why);
    trace_free(&trace);
    muscle_input_free(&input);
    return status == STATUS_OK ? status : command_fail(arguments, status, "%s", why.text);
}

const struct command command_predict = {
    .name = "predict",
    .usage = "PROFILE --muscle M (--pulses FILE | --train FILE) [options]",
    .summary = "force, ripple, potentiation and fatigue of any train",
    .help = "Mean and ripple are those of the force delay_ms later than the "
            "window says, so that they line up with the pulses.\n"
            "Ripple: over each whole period in the window, (max - min)/mean, "
            "the greatest. Fusion index: 1 - ripple in N over the\n"
            "peak of one pulse of the window's last settings on the rested "
            "muscle at the potentiation in use.",
    .options = options,
    .positional_least = 1,
    .positional_most = 1,
    .run = run,
};
