/* `check` of a plan: the dose ledger, made anew from the pulses the plan stands for. Called by check.c once
 * it knows the kind. */
#ifndef PULSEWRIGHT_CORE_COMMAND_CHECK_PLAN_H
#define PULSEWRIGHT_CORE_COMMAND_CHECK_PLAN_H
#include "core/document/document.h"
#include "core/report/option.h"

/* Reads the plan from bytes that are already in memory, prints the ledger (JSON where --json was given), NOT
 * SIGNED on stderr. STATUS_OK within every limit, STATUS_REFUSED where one is broken, STATUS_DOCUMENT where
 * the plan is not readable. */
enum status check_plan(const struct arguments *arguments, const struct document_bytes *bytes);

#endif
