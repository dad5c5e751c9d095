/* A plan in words and in JSON. The goal of this code: the three commands that speak of plans use the same
 * keys and the same words, and none of them can forget that nothing is signed. */
#include "core/command/plan_output.h"
#ifdef PULSEWRIGHT_FIGURES
#include "core/figure/figure.h"
#define PICTURES 1
#endif

#include <math.h>
#include <stdio.h>
#include <time.h>
#include <unistd.h>

static const char *opening_text(unsigned opening)
{
    static const char *const text[] = {"", "single", "doublet", "triplet"};
    return opening <= 3 ? text[opening] : "";
}

static const char *shape_text(enum ramp_shape shape)
{
    static const char *const text[] = {
        [RAMP_LINEAR] = "linear", [RAMP_RAISED_COSINE] = "raised-cosine", [RAMP_EXPONENTIAL] = "exponential"};
    return text[shape];
}

static void json_why(struct json *json, const char *key, const struct plan_why *why)
{
    json_object(json, key);
    json_text(json, "reason", plan_why_text(why->reason));
    json_number(json, "value", why->value);
    json_number(json, "limit", why->limit);
    json_text(json, "unit", why->unit);
    json_object_end(json);
}

static void json_ramp(struct json *json, const char *key, const struct ramp *ramp)
{
    json_object(json, key);
    json_text(json, "shape", shape_text(ramp->shape));
    json_number(json, "ms", ramp->ms);
    json_array(json, "pieces");
    for (size_t i = 0; i < ramp->pieces; i++) {
        const struct ramp_piece *piece = &ramp->piece[i];
        json_object(json, NULL);
        json_number(json, "pulses", piece->pulses);
        json_number(json, "from_us", piece->from_us);
        json_number(json, "to_us", piece->to_us);
        json_number(json, "from_ma", piece->from_ua / 1000.0);
        json_number(json, "to_ma", piece->to_ua / 1000.0);
        json_object_end(json);
    }
    json_array_end(json);
    json_object_end(json);
}

static void json_recount(struct json *json, const struct plan_recount *recount)
{
    json_object(json, "recount");
    json_number(json, "mean_n_first", recount->mean_n_first);
    json_number(json, "mean_n_last", recount->mean_n_last);
    json_number(json, "mean_n_low", recount->mean_n_low);
    json_number(json, "mean_n_high", recount->mean_n_high);
    json_number(json, "peak_n", recount->peak_n);
    json_number(json, "ripple_percent", recount->ripple_percent);
    json_number(json, "droop_percent", recount->droop_percent);
    json_number(json, "rise_ms", recount->rise_ms);
    json_number(json, "overshoot_percent", recount->overshoot_percent);
    json_number(json, "capacity", recount->capacity);
    json_number(json, "remaining_20", recount->remaining_20);
    json_number(json, "remaining_50", recount->remaining_50);
    json_number(json, "band_5_n", recount->band_5_n);
    json_number(json, "band_95_n", recount->band_95_n);
    json_object_end(json);
}

static void json_block(struct json *json, const struct plan_channel *channel, const struct plan_block *block)
{
    const struct contraction *settings = &block->settings;
    const bool trimmed = !isnan(settings->trim_duration_us) || !isnan(settings->trim_current_ma);
    json_object(json, NULL);
    json_number(json, "channel", channel->channel);
    json_text(json, "muscle", channel->muscle);
    json_number(json, "first", block->first);
    json_number(json, "count", block->count);
    json_number(json, "frequency_pps", settings->frequency_pps);
    json_text(json, "opening", opening_text(settings->opening));
    json_text(json, "pattern", settings->pairs ? "doublets" : "singles");
    json_number(json, "duration_us", settings->duration_us);
    json_number(json, "current_ma", settings->current_ma);
    json_ramp(json, "ramp_up", &settings->ramp_up);
    json_number(json, "hold_ms", settings->hold_ms);
    if (trimmed) {
        json_object(json, "trim");
        json_number(json, "duration_us",
                    isnan(settings->trim_duration_us) ? settings->duration_us : settings->trim_duration_us);
        json_number(json, "current_ma",
                    isnan(settings->trim_current_ma) ? settings->current_ma : settings->trim_current_ma);
        json_object_end(json);
    }
    json_ramp(json, "ramp_down", &settings->ramp_down);
    json_number(json, "rest_ms", settings->rest_ms);
    json_bool(json, "warm_up", block->warm_up);
    json_why(json, "why", &block->why);
    json_recount(json, &block->recount);
    json_object_end(json);
}

static void json_verdict(struct json *json, const struct plan *plan)
{
    json_bool(json, "feasible", plan->feasible);
    json_text(json, "verdict", plan->verdict);
    json_number(json, "target_n", plan->target_n);
    json_number(json, "contractions_asked", plan->contractions_asked);
    json_number(json, "contractions_met", plan->contractions_met);
    if (plan->first_miss) {
        json_object(json, "first_miss");
        json_number(json, "contraction", plan->first_miss);
        json_text(json, "why", plan_why_text(plan->first_miss_why.reason));
        json_number(json, "value", plan->first_miss_why.value);
        json_number(json, "limit", plan->first_miss_why.limit);
        json_text(json, "unit", plan->first_miss_why.unit);
        json_object_end(json);
    } else {
        json_text(json, "first_miss", NULL);
    }
    const bool binds = plan->binding.reason != WHY_NONE;
    json_text(json, "binding", binds ? plan_why_text(plan->binding.reason) : NULL);
    if (binds) json_why(json, "binding_numbers", &plan->binding);
    json_number(json, "capacity_end", plan->capacity_end);
    json_number(json, "force_remaining_50_end", plan->force_remaining_50_end);
    json_number(json, "charge_total_uc", plan->charge_total_uc);
}

static void json_would_work(struct json *json, const struct plan *plan)
{
    if (plan->feasible) return;
    json_object(json, "would_work");
    json_number(json, "largest_target_n", plan->would_work.largest_target_n);
    json_number(json, "longest_hold_ms", plan->would_work.longest_hold_ms);
    json_number(json, "most_contractions", plan->would_work.most_contractions);
    json_object_end(json);
}

static void json_ramps(struct json *json, const struct plan *plan)
{
    json_array(json, "ramps_tried");
    for (size_t c = 0; c < plan->channels; c++)
        for (size_t i = 0; i < plan->channel[c].ramp_trials; i++) {
            const struct plan_ramp_trial *trial = &plan->channel[c].ramp_trial[i];
            json_object(json, NULL);
            json_number(json, "channel", plan->channel[c].channel);
            json_text(json, "shape", shape_text(trial->shape));
            json_number(json, "ms", trial->ms);
            json_number(json, "rise_ms", trial->rise_ms);
            json_number(json, "overshoot_percent", trial->overshoot_percent);
            json_number(json, "outside_n_s", trial->outside_n_s);
            json_bool(json, "chosen", trial->chosen);
            json_object_end(json);
        }
    json_array_end(json);
}

void plan_output_figures(struct json *json, const struct ledger *ledger)
{
    json_array(json, "figures");
    for (size_t i = 0; i < ledger->figures; i++) {
        const struct ledger_figure *figure = &ledger->figure[i];
        json_object(json, NULL);
        json_number(json, "channel", figure->channel);
        json_text(json, "figure", dose_figure_key(figure->figure));
        json_number(json, "value", figure->value);
        json_text(json, "unit", dose_figure_unit(figure->figure));
        json_number(json, "limit", figure->limit);
        json_text(json, "source", figure->source);
        json_number(json, "share", figure->share);
        json_number(json, "at_ms", figure->at_ms);
        json_bool(json, "attention", figure->attention);
        json_object_end(json);
    }
    json_array_end(json);
    json_array(json, "shown");
    for (size_t i = 0; i < ledger->shown; i++) {
        const struct ledger_shown *shown = &ledger->shown_figure[i];
        json_object(json, NULL);
        json_number(json, "channel", shown->channel);
        json_text(json, "figure", shown->name);
        json_number(json, "value", shown->value);
        json_text(json, "unit", shown->unit);
        json_number(json, "attention_above", shown->attention_above);
        json_bool(json, "attention", shown->attention);
        json_object_end(json);
    }
    json_array_end(json);
}

void plan_output_json(const struct plan *plan, double seconds)
{
    struct json json;
    json_begin(&json, stdout);
    json_verdict(&json, plan);
    json_would_work(&json, plan);
    json_array(&json, "blocks");
    for (size_t c = 0; c < plan->channels; c++)
        for (size_t b = 0; b < plan->channel[c].blocks; b++)
            json_block(&json, &plan->channel[c], &plan->channel[c].block[b]);
    json_array_end(&json);
    json_ramps(&json, plan);
    json_number(&json, "ensemble_met_share", plan->ensemble_met_share);
    json_bool(&json, "within", plan->ledger.within);
    json_array(&json, "notes");
    for (size_t i = 0; i < plan->notes; i++) json_text(&json, NULL, plan->note[i]);
    json_array_end(&json);
    json_number(&json, "seconds", seconds);
    json_text(&json, "approval", NOT_SIGNED_TEXT);
    json_end(&json);
}

static void print_block(const struct plan_block *block)
{
    const struct contraction *settings = &block->settings;
    const struct plan_recount *recount = &block->recount;
    char which[32], to[48] = "";
    if (block->count > 1)
        (void)snprintf(which, sizeof which, "%u-%u", block->first, block->first + block->count - 1);
    else
        (void)snprintf(which, sizeof which, "%u", block->first);
    if (!isnan(settings->trim_duration_us))
        (void)snprintf(to, sizeof to, " -> %g us", settings->trim_duration_us);
    if (!isnan(settings->trim_current_ma))
        (void)snprintf(to, sizeof to, " -> %g mA", settings->trim_current_ma);
    printf("  %-9s %g Hz%s%s  %g us at %g mA%s  mean %.1f to %.1f N, ripple %.1f %%, %s\n", which,
           settings->frequency_pps, settings->opening > 1 ? ", " : "",
           settings->opening > 1 ? opening_text(settings->opening) : "", settings->duration_us,
           settings->current_ma, to, recount->mean_n_low, recount->mean_n_high, recount->ripple_percent,
           plan_why_text(block->why.reason));
}

static void print_would_work(const struct plan *plan)
{
    const double target = plan->would_work.largest_target_n, hold = plan->would_work.longest_hold_ms;
    const unsigned contractions = plan->would_work.most_contractions;
    const bool any = !isnan(target) || !isnan(hold) || contractions > 0;
    printf("Would work: %s", any ? "" : "nothing that was tried");
    if (!isnan(target))
        printf("a target of %.5g N%s", target, !isnan(hold) || contractions > 0 ? ", or " : "");
    if (!isnan(hold)) printf("a hold of %.5g ms%s", hold, contractions > 0 ? ", or " : "");
    if (contractions > 0) printf("%u contraction%s", contractions, contractions == 1 ? "" : "s");
    printf("\n");
}

void plan_output_text(const struct plan *plan)
{
    printf("%s\n", plan->verdict);
    if (plan->first_miss && isnan(plan->first_miss_why.value)) /* a hold that never settles has no rise */
        printf("First miss: contraction %u, %s (the force never settles; %.4g %s allowed)\n",
               plan->first_miss, plan_why_text(plan->first_miss_why.reason), plan->first_miss_why.limit,
               plan->first_miss_why.unit);
    else if (plan->first_miss)
        printf("First miss: contraction %u, %s (%.5g %s against %.5g)\n", plan->first_miss,
               plan_why_text(plan->first_miss_why.reason), plan->first_miss_why.value,
               plan->first_miss_why.unit, plan->first_miss_why.limit);
    if (!plan->feasible && plan->demand.contractions > 0) print_would_work(plan);
    for (size_t c = 0; c < plan->channels; c++) {
        const struct plan_channel *channel = &plan->channel[c];
        printf("Channel %u, %s%s%s\n", channel->channel, channel->muscle, channel->side[0] ? ", " : "",
               channel->side);
        for (size_t b = 0; b < channel->blocks; b++) print_block(&channel->block[b]);
    }
    printf("At the end: capacity %.3f, remaining force at 50 pps %.3f; charge %.0f uC; %s\n",
           plan->capacity_end, plan->force_remaining_50_end, plan->charge_total_uc,
           plan->ledger.within ? "within every limit" : "OVER A LIMIT");
    if (!isnan(plan->ensemble_met_share))
        printf("Of the muscles this one may be, %.0f %% meet the whole demand\n",
               100.0 * plan->ensemble_met_share);
    for (size_t i = 0; i < plan->notes; i++) printf("Note: %s\n", plan->note[i]);
}

#ifdef PICTURES
static void draw_session(cairo_t *cairo, double width, double height, const void *context)
{
    const struct figure_style style = {.approval = NOT_SIGNED_TEXT, .dark = false, .scale = 1.0};
    figure_session_draw(cairo, width, height, context, 1, &style);
}
#endif

static enum status write_picture(const struct arguments *arguments, const struct plan *plan,
                                 struct message *why)
{
    const char *path = argument(arguments, "--picture");
    if (!path) return STATUS_OK;
#ifdef PICTURES
    return figure_write(path, 1100.0, 520.0, draw_session, plan, argument_given(arguments, "--replace"), why);
#else
    (void)plan;
    return status_fail(why, STATUS_USAGE, "--picture: this build draws no figures");
#endif
}

enum status plan_output_ready(const struct arguments *arguments)
{
    static const char *const outputs[] = {"-o", "--picture"};
    if (!argument(arguments, "-o")) return command_fail(arguments, STATUS_USAGE, "-o is needed");
#ifndef PICTURES
    if (argument(arguments, "--picture"))
        return command_fail(arguments, STATUS_USAGE, "--picture: this build draws no figures");
#endif
    for (size_t i = 0; i < sizeof outputs / sizeof *outputs && !argument_given(arguments, "--replace"); i++) {
        const char *path = argument(arguments, outputs[i]);
        if (path && access(path, F_OK) == 0)
            return command_fail(arguments, STATUS_USAGE,
                                "%s is there already; --replace writes anew and keeps the old one as %s.1",
                                path, path);
    }
    return STATUS_OK;
}

enum status plan_output_write(const struct arguments *arguments, const struct plan *plan, struct message *why)
{
    struct text_out out = {0};
    plan_print(plan, &out);
    enum status status = document_write_file(argument(arguments, "-o"), out.data, out.size,
                                             argument_given(arguments, "--replace"), why);
    text_out_free(&out);
    if (status == STATUS_OK) status = write_picture(arguments, plan, why);
    return status;
}

enum status plan_output_today(const struct arguments *arguments, struct date *today)
{
    const char *text = argument(arguments, "--today");
    if (text) {
        if (date_read(text, today)) return STATUS_OK;
        return command_fail(arguments, STATUS_USAGE, "--today holds \"%s\", it may hold a day as YYYY-MM-DD",
                            text);
    }
    const time_t now = time(NULL);
    struct tm local;
    *today = (struct date){0};
    if (localtime_r(&now, &local))
        *today = (struct date){local.tm_year + 1900, local.tm_mon + 1, local.tm_mday};
    return STATUS_OK;
}

static double monotonic_s(void)
{
    struct timespec now;
    (void)clock_gettime(CLOCK_MONOTONIC, &now);
    return (double)now.tv_sec + 1e-9 * (double)now.tv_nsec;
}

void plan_progress_begin(struct plan_progress *progress)
{
    *progress = (struct plan_progress){.began_s = monotonic_s(), .terminal = isatty(STDERR_FILENO) == 1};
}

bool plan_progress_show(void *context, double share, const char *what)
{
    struct plan_progress *progress = context;
    if (!progress->terminal || monotonic_s() - progress->began_s < 1.0) return true;
    progress->shown = true;
    fprintf(stderr, "\r%s %3.0f %%\033[K", what, 100.0 * share);
    return true;
}

double plan_progress_end(struct plan_progress *progress)
{
    if (progress->shown) fprintf(stderr, "\r\033[K");
    return monotonic_s() - progress->began_s;
}
