/* Widgets in immediate mode: each call takes input and appends to a fixed command list; nothing here knows a
 * window. A frame is ui_begin, widgets, ui_end; the painter then draws the list. Focus goes by Tab;
 * everything can be done by keyboard. */
#ifndef PULSEWRIGHT_GUI_WIDGET_UI_H
#define PULSEWRIGHT_GUI_WIDGET_UI_H
#include <stdbool.h>
#include <stddef.h>

enum { UI_COMMANDS_MAX = 1024, UI_TEXT_SIZE = 160, UI_EDIT_SIZE = 32, UI_EVENTS_MAX = 64 };

enum ui_ink {
    UI_PAPER,
    UI_PANEL,
    UI_FIELD,
    UI_TEXT,
    UI_QUIET,
    UI_ACCENT,
    UI_WARNING,
    UI_BANNER,
    UI_BANNER_TEXT,
    UI_INKS
};
enum ui_place { UI_LEFT, UI_CENTRE, UI_RIGHT };
enum ui_command_kind { UI_FILL, UI_FRAME, UI_WORDS, UI_FIGURE };
struct ui_box {
    double x, y, width, height;
};
struct ui_command {
    enum ui_command_kind kind;
    struct ui_box box;
    enum ui_ink ink;
    enum ui_place place; /* WORDS */
    bool bold;
    int figure;              /* FIGURE: which one the view draws there */
    char text[UI_TEXT_SIZE]; /* WORDS */
};

enum ui_key {
    UI_KEY_NONE,
    UI_KEY_TAB,
    UI_KEY_BACK_TAB,
    UI_KEY_ENTER,
    UI_KEY_ESCAPE,
    UI_KEY_UP,
    UI_KEY_DOWN,
    UI_KEY_LEFT,
    UI_KEY_RIGHT,
    UI_KEY_BACKSPACE,
    UI_KEY_UNDO,
    UI_KEY_REDO,
    UI_KEY_SPACE
};
enum ui_event_kind {
    UI_EVENT_KEY,
    UI_EVENT_TEXT,
    UI_EVENT_PRESS,
    UI_EVENT_RELEASE,
    UI_EVENT_MOVE,
    UI_EVENT_WHEEL
};
struct ui_event {
    enum ui_event_kind kind;
    enum ui_key key;
    char text[8]; /* UTF-8 of one TEXT event */
    double x, y;
    int steps; /* WHEEL: up is positive */
};

struct ui {
    struct ui_command command[UI_COMMANDS_MAX];
    size_t commands;
    double width, height, scale;           /* scale: 1 is 14 px text */
    struct ui_event posted[UI_EVENTS_MAX]; /* not yet in a frame */
    size_t posts;
    struct ui_event event[UI_EVENTS_MAX]; /* of this frame */
    size_t events;
    double pointer_x, pointer_y;
    bool pressed;
    int focus, active, next_id, ids_before; /* ids count up through a frame, from 1 */
    bool editing;
    char edit[UI_EDIT_SIZE];
    double drag_from_x, drag_from_value;
    char complaint[UI_TEXT_SIZE]; /* why a typed value was not taken; the view shows it; "": none */
};

void ui_init(struct ui *ui);
void ui_post(struct ui *ui, struct ui_event event); /* for the coming frames */
/* Events wait still: one that moves the focus ends a frame, so that what was typed after it reaches the right
 * field. */
bool ui_pending(const struct ui *ui);
void ui_begin(struct ui *ui, double width, double height, double scale);
void ui_end(struct ui *ui);                        /* forgets the frame's events */
bool ui_key_taken(struct ui *ui, enum ui_key key); /* this key was typed in this frame and is taken now */

void ui_fill(struct ui *ui, struct ui_box box, enum ui_ink ink);
void ui_words(struct ui *ui, struct ui_box box, const char *text, enum ui_ink ink, enum ui_place place,
              bool bold);
void ui_figure(struct ui *ui, struct ui_box box, int figure);
/* Each widget fills its box and returns true where it changed something. */
bool ui_button(struct ui *ui, struct ui_box box, const char *text);
bool ui_choice(struct ui *ui, struct ui_box box, const char *label, const char *const *choices, int *chosen);
/* A number with a unit: typed, stepped (arrows, wheel), dragged. Out of range it says why and keeps the old
 * value. */
bool ui_number(struct ui *ui, struct ui_box box, const char *label, const char *unit, double least,
               double most, double step, double *value);
/* An area that takes clicks: true and where, 0..1, where it was pressed. */
bool ui_area(struct ui *ui, struct ui_box box, double *x, double *y);

#endif
