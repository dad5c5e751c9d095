/* The sheet in words: what a clinician reads before a session, line by line, in plain words with units and no
 * key names. The printed sheet draws these lines, signing shows them, and a sign-off binds their digest. */
#ifndef PULSEWRIGHT_CORE_PLAN_SHEET_H
#define PULSEWRIGHT_CORE_PLAN_SHEET_H
#include "core/document/plan_document.h"
#include "core/document/profile.h"

enum sheet_style { SHEET_VERDICT, SHEET_HEADING, SHEET_TEXT, SHEET_ROW, SHEET_SMALL };
enum { SHEET_TEXT_SIZE = 512, SHEET_LINES_MAX = 640, SHEET_BLOCKS_MAX = 14 };
struct sheet_line {
    enum sheet_style style;
    char text[SHEET_TEXT_SIZE]; /* SHEET_ROW: columns between tabs */
};
struct sheet {
    size_t lines;
    struct sheet_line line[SHEET_LINES_MAX];
};
/* approval: "NOT SIGNED .." or who signed; today: year 0 where unknown. */
void sheet_of_plan(const struct plan *plan, const char *approval, struct sheet *sheet);
void sheet_of_profile(const struct profile *profile, const char *approval, struct date today,
                      struct sheet *sheet);
/* BLAKE2b-256 over the lines, each ended by a newline. */
void sheet_digest(const struct sheet *sheet, uint8_t digest[DIGEST_SIZE]);
/* "2.5 s", "400 ms": a time as a person says it. Returns buffer. */
const char *sheet_time(double ms, char buffer[32]);

#endif
