/* pulsewright curves: a muscle at a glance. The goal of this code:
 * force-frequency, recruitment, staircase and recovery as a picture, a table
 * and JSON, from the engine of every prediction. */
#include "core/command/commands.h"

#include "core/command/muscle_input.h"
#include "core/predict/curves.h"
#include "core/report/json.h"

#ifdef PULSEWRIGHT_FIGURES
#include "core/figure/figure.h"
#endif

#include <math.h>
#include <stdio.h>

static const struct option options[] = {
    {"--muscle", "M", "the muscle (may be left out where the profile has one)"},
    {"--picture", "FILE", "draw the four curves (.png, .svg, .pdf)"},
    {"-o", "CSV", "write every point: curve,x,x_unit,value,unit"},
    {"--replace", NULL, "write over existing files, keeping the old ones as NAME.1"},
    {"--json", NULL, "the curves for machines"},
    {NULL, NULL, NULL},
};

static void csv_curve(struct text_out *out, const char *name, const double *x, const char *x_unit,
                      const double *y, const char *unit, size_t count)
{
    char at[32], value[32];
    for (size_t i = 0; i < count; i++)
        text_out_print(out, "%s,%s,%s,%s,%s\r\n", name, number_text(x[i], at), x_unit,
                       number_text(y[i], value), unit);
}

static void print_csv(const struct curves *c, struct text_out *out)
{
    text_out_print(out, "curve,x,x_unit,value,unit\r\n");
    csv_curve(out, "force-frequency rested", c->frequency_pps, "pps", c->rested_n, "N", c->frequencies);
    if (c->has_dormant)
        csv_curve(out, "force-frequency dormant", c->frequency_pps, "pps", c->dormant_n, "N", c->frequencies);
    if (c->has_tired)
        csv_curve(out, "force-frequency tired", c->frequency_pps, "pps", c->tired_n, "N", c->frequencies);
    for (size_t row = 0; row < c->currents; row++) {
        char name[64];
        (void)snprintf(name, sizeof name, "recruitment at %g mA", c->current_ma[row]);
        csv_curve(out, name, c->duration_us, "us", c->recruited[row], "", c->durations);
    }
    csv_curve(out, "staircase at 2 Hz", c->staircase_s, "s", c->staircase_n, "N", c->staircase);
    csv_curve(out, "remaining force 20 pps", c->recovery_s, "s", c->remaining_20, "", c->recovery);
    csv_curve(out, "remaining force 50 pps", c->recovery_s, "s", c->remaining_50, "", c->recovery);
}

static void json_numbers(struct json *json, const char *key, const double *values, size_t count)
{
    json_array(json, key);
    for (size_t i = 0; i < count; i++) json_number(json, NULL, values[i]);
    json_array_end(json);
}

static void print_json(const struct curves *c)
{
    struct json json;
    json_begin(&json, stdout);
    json_object(&json, "force_frequency");
    json_numbers(&json, "frequency_pps", c->frequency_pps, c->frequencies);
    json_numbers(&json, "rested_n", c->rested_n, c->frequencies);
    if (c->has_dormant) json_numbers(&json, "dormant_n", c->dormant_n, c->frequencies);
    if (c->has_tired) json_numbers(&json, "tired_n", c->tired_n, c->frequencies);
    json_object_end(&json);
    json_object(&json, "recruitment");
    json_numbers(&json, "duration_us", c->duration_us, c->durations);
    json_array(&json, "currents");
    for (size_t row = 0; row < c->currents; row++) {
        json_object(&json, NULL);
        json_number(&json, "current_ma", c->current_ma[row]);
        json_numbers(&json, "recruited", c->recruited[row], c->durations);
        json_object_end(&json);
    }
    json_array_end(&json);
    json_object_end(&json);
    json_object(&json, "staircase");
    json_numbers(&json, "time_s", c->staircase_s, c->staircase);
    json_numbers(&json, "peak_n", c->staircase_n, c->staircase);
    json_object_end(&json);
    json_object(&json, "recovery");
    json_text(&json, "bout", c->bout);
    json_numbers(&json, "time_s", c->recovery_s, c->recovery);
    json_numbers(&json, "force_remaining_20", c->remaining_20, c->recovery);
    json_numbers(&json, "force_remaining_50", c->remaining_50, c->recovery);
    json_object_end(&json);
    json_end(&json);
}

static void print_text(const struct curves *c)
{
    printf("peak of a 1-s train, fully recruited\n%8s %10s", "pps", "rested N");
    if (c->has_dormant) printf(" %10s", "dormant N");
    if (c->has_tired) printf(" %10s", "tired N");
    printf("\n");
    for (size_t i = 0; i < c->frequencies; i++) {
        printf("%8g %10.1f", c->frequency_pps[i], c->rested_n[i]);
        if (c->has_dormant) printf(" %10.1f", c->dormant_n[i]);
        if (c->has_tired) printf(" %10.1f", c->tired_n[i]);
        printf("\n");
    }
    printf("\nstaircase, twitches at 2 Hz: %.1f N first, %.1f N after %g s\n", c->staircase_n[0],
           c->staircase_n[c->staircase - 1], c->staircase_s[c->staircase - 1]);
    printf("after %s: remaining force at 20 pps %.0f %%, at 50 pps %.0f %%; %g s "
           "later %.0f %% and %.0f %%\n",
           c->bout, 100 * c->remaining_20[0], 100 * c->remaining_50[0], c->recovery_s[c->recovery - 1],
           100 * c->remaining_20[c->recovery - 1], 100 * c->remaining_50[c->recovery - 1]);
}

#ifdef PULSEWRIGHT_FIGURES
static void draw_curves(cairo_t *cairo, double width, double height, const void *curves)
{
    const struct figure_style style = {.approval = NOT_SIGNED_TEXT, .dark = false, .scale = 1};
    figure_curves_draw(cairo, width, height, curves, &style);
}
static enum status draw(const char *path, const struct curves *curves, bool replace, struct message *why)
{
    return figure_write(path, 900, 700, draw_curves, curves, replace, why);
}
#else
static enum status draw(const char *path, const struct curves *curves, bool replace, struct message *why)
{
    (void)curves;
    (void)replace;
    return status_fail(why, STATUS_USAGE, "built without figures: %s can not be drawn", path);
}
#endif

static enum status run(const struct arguments *arguments)
{
    struct message why = {.text = ""};
    struct muscle_input input;
    struct curves curves;
    const bool replace = argument_given(arguments, "--replace");
    enum status status = muscle_input_muscle(arguments, arguments->positional[0], &input, &why);
    if (status == STATUS_OK) status = curves_make(&input.muscle->parameters, &curves, &why);
    if (status == STATUS_OK && argument_given(arguments, "-o")) {
        struct text_out out = {0};
        print_csv(&curves, &out);
        status = document_write_file(argument(arguments, "-o"), out.data, out.size, replace, &why);
        text_out_free(&out);
    }
    if (status == STATUS_OK && argument_given(arguments, "--picture"))
        status = draw(argument(arguments, "--picture"), &curves, replace, &why);
    if (status == STATUS_OK && argument_given(arguments, "--json"))
        print_json(&curves);
    else if (status == STATUS_OK)
        print_text(&curves);
    muscle_input_free(&input);
    return status == STATUS_OK ? status : command_fail(arguments, status, "%s", why.text);
}

const struct command command_curves = {
    .name = "curves",
    .usage = "PROFILE --muscle M [--picture FILE] [-o CSV] [--json]",
    .summary = "force-frequency, recruitment, staircase, recovery: the muscle "
               "at a glance",
    .options = options,
    .positional_least = 1,
    .positional_most = 1,
    .run = run,
};
