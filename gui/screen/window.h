/* The window: SDL2, software rendering, a cairo surface as its picture. */
#ifndef PULSEWRIGHT_GUI_SCREEN_WINDOW_H
#define PULSEWRIGHT_GUI_SCREEN_WINDOW_H
#include "core/status/status.h"
#include "gui/screen/paint.h"

/* One turn of the program: takes ui's events, fills ui's commands. */
typedef void (*window_turn)(void *context, struct ui *ui);
struct window_run {
    const char *title;
    int width, height;
    bool dark;
    window_turn turn;
    paint_figure figure;
    void *context;
    long frames;         /* ends after so many, -1: when it is closed */
    const char *picture; /* the last frame goes there as PNG on the way out; NULL: none */
};
enum status window_main(const struct window_run *run, struct message *why);
/* The same without a window: events of a script, one frame a line. */
enum status window_headless(const struct window_run *run, const char *script, struct message *why);

#endif
