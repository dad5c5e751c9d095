/* The printed sheet: the lines of core/plan/sheet.h with a figure, on A4 or Letter, as PDF. */
#ifndef PULSEWRIGHT_CORE_FIGURE_SHEET_H
#define PULSEWRIGHT_CORE_FIGURE_SHEET_H
#include "core/figure/figure.h"
#include "core/plan/sheet.h"

struct sheet_page {
    double width_pt, height_pt;
    const char *banner; /* on top of each page: NOT SIGNED, or who signed */
    void (*figure)(cairo_t *, double width, double height,
                   const void *context); /* NULL: none; after the third line */
    const void *context;
    double figure_height_pt;
};
enum status sheet_write(const char *path, const struct sheet *sheet, const struct sheet_page *page,
                        bool replace, struct message *why);

#endif
