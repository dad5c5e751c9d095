/* The program `pulsewright-panel`: what will these pulses do? */
#include "core/report/json.h"
#include "core/report/option.h"
#include "gui/screen/window.h"
#include "gui/view/score_view.h"

#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/stat.h>
#include <unistd.h>

static const struct option options[] = {
    {"--muscle", "M", "which muscle first"},
    {"--train", "T", "a train to begin with"},
    {"--plan", "P", "a plan to look through, contraction by contraction"},
    {"--stimulator", "S", "whose ranges and steps the fields have"},
    {"--dark", NULL, "light text on dark"},
    {"--size", "WxH", "window size, 1280x800 unless said"},
    {"--frames", "N", "no window: so many frames, then out"},
    {"--script", "FILE", "no window: input, a line a frame (key Tab, text 35, click X Y, wheel X Y N)"},
    {"--picture", "FILE.png", "the last frame, written on the way out"},
    {"--json", NULL, "the figures that are shown, printed on the way out"},
    {NULL, NULL, NULL}};

static void turn(void *context, struct ui *ui)
{
    score_view_frame(context, ui);
}

static void figure(const void *view, int which, cairo_t *cairo, double width, double height, double scale)
{
    score_view_draw(view, which, cairo, width, height, scale);
}

/* The sample person: beside the installed program, or in the source tree it was built from. */
static const char *sample_person(void)
{
    static const char *const places[] = {PULSEWRIGHT_PROFILES_INSTALLED "/people/p-001.yaml",
                                         PULSEWRIGHT_PROFILES_SOURCE "/people/p-001.yaml"};
    for (size_t i = 0; i < sizeof places / sizeof places[0]; i++)
        if (access(places[i], R_OK) == 0) return places[i];
    return places[0];
}

/* A folder stands for the profile.yaml in it. */
static const char *profile_path(const struct arguments *arguments, char path[PATH_SIZE])
{
    struct stat about;
    if (arguments->positionals == 0) return sample_person();
    const char *given = arguments->positional[0];
    if (stat(given, &about) != 0 || !S_ISDIR(about.st_mode)) return given;
    (void)snprintf(path, PATH_SIZE, "%.1000s/profile.yaml", given);
    return path;
}

static enum status load(const struct arguments *arguments, struct score_view *view, struct message *why)
{
    char path[PATH_SIZE];
    struct profile profile = {.person = ""};
    struct train train = {0};
    struct plan *plan = calloc(1, sizeof *plan);
    struct stimulator stimulator;
    const char *train_path = argument(arguments, "--train"), *plan_path = argument(arguments, "--plan"),
               *stimulator_path = argument(arguments, "--stimulator");
    enum status status = plan ? profile_load(profile_path(arguments, path), &profile, why)
                              : status_fail(why, STATUS_INTERNAL, "no memory");
    if (status == STATUS_OK && train_path) status = train_load(train_path, &train, why);
    if (status == STATUS_OK && plan_path) status = plan_load(plan_path, plan, why);
    if (status == STATUS_OK && stimulator_path) status = stimulator_load(stimulator_path, &stimulator, why);
    if (status == STATUS_OK)
        status = score_view_init(view, &profile, argument(arguments, "--muscle"), train_path ? &train : NULL,
                                 plan_path ? plan : NULL, stimulator_path ? &stimulator : NULL, why);
    train_free(&train);
    profile_free(&profile);
    if (plan) plan_free(plan);
    free(plan);
    return status;
}

static void print_figures(const struct score_view *view)
{
    struct json json;
    json_begin(&json, stdout);
    json_number(&json, "peak_n", view->predicted ? view->summary.peak_n : (double)NAN);
    json_number(&json, "mean_n", view->predicted ? view->summary.mean_n : (double)NAN);
    json_number(&json, "frequency_pps", view->settings.frequency_pps);
    json_number(&json, "duration_us", view->settings.duration_us);
    json_number(&json, "current_ma", view->settings.current_ma);
    json_number(&json, "contraction", view->chosen);
    json_text(&json, "approval", NOT_SIGNED_TEXT);
    json_end(&json);
}

static enum status run(const struct arguments *arguments)
{
    struct message why = {""};
    double frames = -1;
    int width = 1280, height = 800;
    enum status status = argument_number(arguments, "--frames", 1, 1e6, &frames);
    if (status != STATUS_OK) return status;
    const char *size = argument(arguments, "--size");
    if (size && (sscanf(size, "%dx%d", &width, &height) != 2 || width < 400 || height < 300 || width > 8000 ||
                 height > 8000))
        return command_fail(arguments, STATUS_USAGE,
                            "--size holds \"%s\", it may hold WIDTHxHEIGHT from 400x300 to 8000x8000", size);
    struct score_view *view = calloc(1, sizeof *view);
    if (!view) return command_fail(arguments, STATUS_INTERNAL, "no memory");
    status = load(arguments, view, &why);
    if (status == STATUS_OK) {
        view->dark = argument_given(arguments, "--dark");
        const struct window_run window = {.title = "pulsewright",
                                          .width = width,
                                          .height = height,
                                          .dark = view->dark,
                                          .turn = turn,
                                          .figure = figure,
                                          .context = view,
                                          .frames = (long)frames,
                                          .picture = argument(arguments, "--picture")};
        const bool headless = frames > 0 || argument_given(arguments, "--script");
        status = headless ? window_headless(&window, argument(arguments, "--script"), &why)
                          : window_main(&window, &why);
        if (status == STATUS_OK && argument_given(arguments, "--json")) print_figures(view);
        score_view_free(view);
    }
    free(view);
    return status == STATUS_OK ? status : command_fail(arguments, status, "%s", why.text);
}

static const struct command panel = {
    .name = "",
    .usage = "[PROFILE|DIR] [--muscle M] [--train T] [--plan P] [--stimulator S] [--dark] [--size WxH]",
    .summary = "What will these pulses do? Pulses, activation and force on one time axis, predicted at every "
               "change.",
    .help = "Alone it opens a sample person. Every number can be typed, stepped (arrows, wheel) and dragged; "
            "Tab moves on;\n"
            "Ctrl+Z and Ctrl+Y undo and redo; Ctrl+Q ends. Nothing is sent from here.",
    .options = options,
    .positional_most = 1,
    .run = run};

int main(int argc, char **argv)
{
    const struct program program = {.name = "pulsewright-panel",
                                    .summary = "What will these pulses do?",
                                    .version = "pulsewright-panel " PULSEWRIGHT_VERSION,
                                    .epilogue = option_quantities};
    return command_main(&program, &panel, argc, argv);
}
