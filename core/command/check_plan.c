/* `check` of a plan. The goal of this code: the ledger that is shown comes from the pulses the plan stands
 * for, played through the device's guard, never from the document's own copy; and limits that a document
 * states are never weaker than the device's and the program's. */
#include "core/command/check_plan.h"
#include "core/command/plan_output.h"
#include "core/plan/plan.h"

#include <stdio.h>
#include <stdlib.h>

static void print_json(const struct plan *plan, const struct ledger *ledger)
{
    struct json json;
    json_begin(&json, stdout);
    json_text(&json, "document", document_kind_format(DOCUMENT_PLAN));
    json_bool(&json, "within", ledger->within);
    json_text(&json, "verdict", plan->verdict);
    plan_output_figures(&json, ledger);
    json_number(&json, "pulses", (double)ledger->pulses);
    json_number(&json, "charge_total_uc", ledger->charge_total_uc);
    json_number(&json, "session_ms", ledger->session_ms);
    json_text(&json, "approval", NOT_SIGNED_TEXT);
    json_end(&json);
}

static void print_text(const struct plan *plan, const struct ledger *ledger)
{
    printf("%s. %s\n", ledger->within ? "Within every limit" : "OVER A LIMIT", plan->verdict);
    for (size_t i = 0; i < ledger->figures; i++) {
        const struct ledger_figure *figure = &ledger->figure[i];
        printf("  channel %u  %-36s %10.4g of %-8.4g %-4s %5.1f %%  (%s, at %.1f s)%s%s\n", figure->channel,
               dose_figure_text(figure->figure), figure->value, figure->limit,
               dose_figure_unit(figure->figure), 100.0 * figure->share, figure->source,
               figure->at_ms / 1000.0, figure->share > 1.0 ? "  OVER" : "",
               figure->attention ? "  attention" : "");
    }
    for (size_t i = 0; i < ledger->shown; i++) {
        const struct ledger_shown *shown = &ledger->shown_figure[i];
        printf("  channel %u  %-36s %10.4g %s%s\n", shown->channel, shown->name, shown->value, shown->unit,
               shown->attention ? "  attention" : "");
    }
    printf("%llu pulses, %.1f mC, %.1f s\n", (unsigned long long)ledger->pulses,
           ledger->charge_total_uc / 1000.0, ledger->session_ms / 1000.0);
}

enum status check_plan(const struct arguments *arguments, const struct document_bytes *bytes)
{
    struct message why = {.text = ""};
    struct plan plan = {0};
    struct ledger ledger = {0};
    enum status status = plan_parse(bytes, &plan, &why);
    if (status != STATUS_OK) return command_fail(arguments, status, "%s", why.text);
    status = plan_ledger(&plan, &ledger, &why);
    if (status == STATUS_OK) {
        if (argument_given(arguments, "--json"))
            print_json(&plan, &ledger);
        else
            print_text(&plan, &ledger);
        fprintf(stderr, "%s\n", NOT_SIGNED_TEXT);
    }
    const bool within = status == STATUS_OK && ledger.within;
    if (status == STATUS_OK) ledger_free(&ledger);
    plan_free(&plan);
    if (status != STATUS_OK) return command_fail(arguments, status, "%s: %s", bytes->path, why.text);
    return within ? STATUS_OK : STATUS_REFUSED;
}
