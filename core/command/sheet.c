/* `pulsewright sheet`: the page a clinician reads before a session. */
#include "core/plan/sheet.h"
#include "core/command/commands.h"
#include "core/document/plan_document.h"
#include "core/predict/curves.h"
#ifdef PULSEWRIGHT_FIGURES
#include "core/figure/sheet.h"
#endif

#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <time.h>

static const struct option options[] = {
    {"-o", "SHEET.pdf", "where to (needed)"},
    {"--paper", "A4|Letter", "paper size, A4 unless said"},
    {"--replace", NULL, "an existing file is kept as SHEET.pdf.1 and replaced"},
    {"--today", "DATE", "the day, YYYY-MM-DD, for the profile's age; today unless said"},
    {NULL, NULL, NULL}};

#ifdef PULSEWRIGHT_FIGURES
static void draw_session(cairo_t *cairo, double width, double height, const void *context)
{
    figure_session_draw(cairo, width, height, context, 0, &(struct figure_style){.scale = 1});
}

static void draw_curves(cairo_t *cairo, double width, double height, const void *context)
{
    figure_curves_draw(cairo, width, height, context, &(struct figure_style){.scale = 1});
}

static enum status paper_size(const struct arguments *arguments, struct sheet_page *page)
{
    const char *paper = argument(arguments, "--paper");
    page->width_pt = 595;
    page->height_pt = 842;
    if (!paper || strcmp(paper, "A4") == 0) return STATUS_OK;
    if (strcmp(paper, "Letter") != 0)
        return command_fail(arguments, STATUS_USAGE, "--paper holds \"%s\", it may hold A4 or Letter", paper);
    page->width_pt = 612;
    page->height_pt = 792;
    return STATUS_OK;
}

static enum status write_plan(const struct document_bytes *bytes, const struct arguments *arguments,
                              struct sheet_page *page, struct message *why)
{
    struct plan plan;
    struct sheet *sheet = malloc(sizeof *sheet);
    enum status status =
        sheet ? plan_parse(bytes, &plan, why) : status_fail(why, STATUS_INTERNAL, "no memory");
    if (status == STATUS_OK) {
        sheet_of_plan(&plan, NOT_SIGNED_TEXT, sheet);
        if (plan.contractions_asked) { /* a compiled train has no session to show */
            page->figure = draw_session;
            page->context = &plan;
            page->figure_height_pt = 190;
        }
        status =
            sheet_write(argument(arguments, "-o"), sheet, page, argument_given(arguments, "--replace"), why);
        plan_free(&plan);
    }
    free(sheet);
    return status;
}

static enum status write_profile(const struct document_bytes *bytes, const struct arguments *arguments,
                                 struct sheet_page *page, struct date today, struct message *why)
{
    struct profile profile;
    struct sheet *sheet = malloc(sizeof *sheet);
    struct curves *curves = malloc(sizeof *curves);
    enum status status = sheet && curves ? profile_parse(bytes, &profile, why)
                                         : status_fail(why, STATUS_INTERNAL, "no memory");
    if (status == STATUS_OK) {
        sheet_of_profile(&profile, NOT_SIGNED_TEXT, today, sheet);
        struct message unused;
        if (profile_muscle_usable(&profile.muscle[0], &unused) == STATUS_OK &&
            curves_make(&profile.muscle[0].parameters, curves, &unused) == STATUS_OK) {
            page->figure = draw_curves;
            page->context = curves;
            page->figure_height_pt = 330;
        }
        status =
            sheet_write(argument(arguments, "-o"), sheet, page, argument_given(arguments, "--replace"), why);
        profile_free(&profile);
    }
    free(curves);
    free(sheet);
    return status;
}

static struct date day_of_clock(void)
{
    const time_t now = time(NULL);
    struct tm parts;
    if (!localtime_r(&now, &parts)) return (struct date){0};
    return (struct date){parts.tm_year + 1900, parts.tm_mon + 1, parts.tm_mday};
}

static enum status run(const struct arguments *arguments)
{
    struct document_bytes bytes;
    struct message why = {""};
    struct sheet_page page = {.banner = NOT_SIGNED_TEXT};
    struct date today = day_of_clock();
    enum document_kind kind;
    if (!argument(arguments, "-o")) return command_fail(arguments, STATUS_USAGE, "-o SHEET.pdf is missing");
    if (argument(arguments, "--today") && !date_read(argument(arguments, "--today"), &today))
        return command_fail(arguments, STATUS_USAGE, "--today holds \"%s\", it may hold a day YYYY-MM-DD",
                            argument(arguments, "--today"));
    enum status status = paper_size(arguments, &page);
    if (status != STATUS_OK) return status;
    status = document_read_bytes(arguments->positional[0], &bytes, &why);
    if (status == STATUS_OK) status = document_kind_of(&bytes, &kind, &why);
    if (status == STATUS_OK && kind == DOCUMENT_PLAN)
        status = write_plan(&bytes, arguments, &page, &why);
    else if (status == STATUS_OK && kind == DOCUMENT_PROFILE)
        status = write_profile(&bytes, arguments, &page, today, &why);
    else if (status == STATUS_OK)
        status = status_fail(&why, STATUS_USAGE, "%s is a %s, a sheet is made of a plan or a profile",
                             bytes.path, document_kind_format(kind));
    document_bytes_free(&bytes);
    if (status != STATUS_OK) return command_fail(arguments, status, "%s", why.text);
    fprintf(stderr, "%s\n", NOT_SIGNED_TEXT);
    return STATUS_OK;
}
#else
static enum status run(const struct arguments *arguments)
{
    return command_fail(arguments, STATUS_USAGE, "built without figures");
}
#endif

const struct command command_sheet = {
    .name = "sheet",
    .usage = "PLAN|PROFILE -o SHEET.pdf [--paper A4|Letter] [--replace] [--today DATE]",
    .summary = "the page a clinician reads before a session, as PDF",
    .help = "A plan's sheet has the verdict first, then the blocks in plain words, the dose with its "
            "margins, cautions,\n"
            "stop rules and a place to sign. A profile's sheet shows the muscle at a glance.",
    .options = options,
    .positional_least = 1,
    .positional_most = 1,
    .run = run};
