/* Widgets. The goal of this code: a number is never taken wrongly: what can not be read or is out of range
 * stays visible, says why, and changes nothing. */
#include "gui/widget/ui.h"

#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

void ui_init(struct ui *ui)
{
    memset(ui, 0, sizeof *ui);
    ui->pointer_x = ui->pointer_y = -1;
}

void ui_post(struct ui *ui, struct ui_event event)
{
    if (ui->posts < UI_EVENTS_MAX) ui->posted[ui->posts++] = event;
}

bool ui_pending(const struct ui *ui)
{
    return ui->posts > 0;
}

/* A press or a key may move the focus or end an edit. */
static bool ends_frame(const struct ui_event *event)
{
    return event->kind == UI_EVENT_PRESS || event->kind == UI_EVENT_RELEASE || event->kind == UI_EVENT_KEY;
}

static void take_posted(struct ui *ui)
{
    size_t count = 0;
    while (count < ui->posts && !ends_frame(&ui->posted[count])) count++;
    if (count < ui->posts) count++;
    memcpy(ui->event, ui->posted, count * sizeof *ui->event);
    ui->events = count;
    ui->posts -= count;
    memmove(ui->posted, ui->posted + count, ui->posts * sizeof *ui->posted);
}

/* Keys that move the focus are taken first; a typed value is kept until its own field sees them. */
static void move_focus(struct ui *ui)
{
    for (size_t i = 0; i < ui->events; i++) {
        struct ui_event *event = &ui->event[i];
        if (event->kind == UI_EVENT_MOVE || event->kind == UI_EVENT_PRESS ||
            event->kind == UI_EVENT_RELEASE) {
            ui->pointer_x = event->x;
            ui->pointer_y = event->y;
        }
        if (event->kind == UI_EVENT_PRESS) ui->pressed = true;
        if (event->kind == UI_EVENT_RELEASE) ui->pressed = false;
    }
}

void ui_begin(struct ui *ui, double width, double height, double scale)
{
    ui->commands = 0;
    ui->ids_before = ui->next_id;
    ui->next_id = 0;
    ui->width = width;
    ui->height = height;
    ui->scale = scale;
    take_posted(ui);
    move_focus(ui);
}

static void leave_focus(struct ui *ui, int to)
{
    const int count = ui->next_id;
    ui->editing = false;
    ui->focus = count ? (to - 1 + count) % count + 1 : 0;
}

void ui_end(struct ui *ui)
{
    if (ui_key_taken(ui, UI_KEY_TAB)) leave_focus(ui, ui->focus + 1);
    if (ui_key_taken(ui, UI_KEY_BACK_TAB)) leave_focus(ui, ui->focus <= 1 ? ui->next_id : ui->focus - 1);
    ui->events = 0;
    if (!ui->pressed) ui->active = 0;
}

static struct ui_event *find(struct ui *ui, enum ui_event_kind kind, enum ui_key key)
{
    for (size_t i = 0; i < ui->events; i++)
        if (ui->event[i].kind == kind && (kind != UI_EVENT_KEY || ui->event[i].key == key))
            return &ui->event[i];
    return NULL;
}

static void drop(struct ui *ui, struct ui_event *event)
{
    const size_t at = (size_t)(event - ui->event);
    memmove(event, event + 1, (ui->events - at - 1) * sizeof *event);
    ui->events--;
}

bool ui_key_taken(struct ui *ui, enum ui_key key)
{
    struct ui_event *event = find(ui, UI_EVENT_KEY, key);
    if (event) drop(ui, event);
    return event != NULL;
}

static bool inside(const struct ui_box *box, double x, double y)
{
    return x >= box->x && y >= box->y && x < box->x + box->width && y < box->y + box->height;
}

/* A press in this box, taken. */
static bool press_taken(struct ui *ui, const struct ui_box *box, double *x, double *y)
{
    struct ui_event *event = find(ui, UI_EVENT_PRESS, UI_KEY_NONE);
    if (!event || !inside(box, event->x, event->y)) return false;
    *x = event->x;
    *y = event->y;
    drop(ui, event);
    return true;
}

static struct ui_command *append(struct ui *ui, enum ui_command_kind kind, struct ui_box box, enum ui_ink ink)
{
    static struct ui_command beyond; /* a full list loses what is drawn last, never memory */
    struct ui_command *command = ui->commands < UI_COMMANDS_MAX ? &ui->command[ui->commands++] : &beyond;
    *command = (struct ui_command){.kind = kind, .box = box, .ink = ink};
    return command;
}

void ui_fill(struct ui *ui, struct ui_box box, enum ui_ink ink)
{
    (void)append(ui, UI_FILL, box, ink);
}

void ui_words(struct ui *ui, struct ui_box box, const char *text, enum ui_ink ink, enum ui_place place,
              bool bold)
{
    struct ui_command *command = append(ui, UI_WORDS, box, ink);
    command->place = place;
    command->bold = bold;
    (void)snprintf(command->text, sizeof command->text, "%s", text);
}

void ui_figure(struct ui *ui, struct ui_box box, int figure)
{
    append(ui, UI_FIGURE, box, UI_PAPER)->figure = figure;
}

static void frame(struct ui *ui, struct ui_box box, bool focused)
{
    ui_fill(ui, box, UI_FIELD);
    (void)append(ui, UI_FRAME, box, focused ? UI_ACCENT : UI_QUIET);
}

/* The field part of a box whose left part is the label. */
static struct ui_box beside_label(const struct ui *ui, struct ui_box box)
{
    const double label = box.width * 0.47;
    (void)ui;
    return (struct ui_box){box.x + label, box.y, box.width - label, box.height};
}

static void take_focus(struct ui *ui, int id)
{
    if (ui->focus != id) ui->editing = false;
    ui->focus = id;
    ui->active = id;
}

bool ui_button(struct ui *ui, struct ui_box box, const char *text)
{
    const int id = ++ui->next_id;
    double x, y;
    bool pressed = press_taken(ui, &box, &x, &y);
    if (pressed) take_focus(ui, id);
    if (ui->focus == id && (ui_key_taken(ui, UI_KEY_ENTER) || ui_key_taken(ui, UI_KEY_SPACE))) pressed = true;
    frame(ui, box, ui->focus == id);
    ui_words(ui, box, text, UI_TEXT, UI_CENTRE, false);
    return pressed;
}

bool ui_choice(struct ui *ui, struct ui_box box, const char *label, const char *const *choices, int *chosen)
{
    const int id = ++ui->next_id, before = *chosen;
    struct ui_box field = beside_label(ui, box);
    double x, y;
    int count = 0;
    while (choices[count]) count++;
    int by = 0;
    if (press_taken(ui, &field, &x, &y)) {
        take_focus(ui, id);
        by = x < field.x + field.width * 0.3 ? -1 : 1;
    }
    if (ui->focus == id) {
        if (ui_key_taken(ui, UI_KEY_UP) || ui_key_taken(ui, UI_KEY_LEFT)) by = -1;
        if (ui_key_taken(ui, UI_KEY_DOWN) || ui_key_taken(ui, UI_KEY_RIGHT) || ui_key_taken(ui, UI_KEY_SPACE))
            by = 1;
    }
    if (count && by) *chosen = (*chosen + by + count) % count;
    frame(ui, field, ui->focus == id);
    ui_words(ui, box, label, UI_TEXT, UI_LEFT, false);
    if (count) ui_words(ui, field, choices[*chosen], UI_TEXT, UI_CENTRE, false);
    ui_words(ui, field, " \xE2\x80\xB9", UI_QUIET, UI_LEFT, false);
    ui_words(ui, field, "\xE2\x80\xBA ", UI_QUIET, UI_RIGHT, false);
    return *chosen != before;
}

/* Takes a typed number; where it can not, says why. */
static bool commit_edit(struct ui *ui, const char *label, double least, double most, double *value)
{
    char *end = NULL;
    const double typed = strtod(ui->edit, &end);
    ui->editing = false;
    if (end == ui->edit || *end != '\0' || !isfinite(typed)) {
        (void)snprintf(ui->complaint, sizeof ui->complaint, "%s: \"%s\" is no number", label, ui->edit);
    } else if (typed < least || typed > most) {
        (void)snprintf(ui->complaint, sizeof ui->complaint, "%s: %s, may be %g to %g", label, ui->edit, least,
                       most);
    } else {
        ui->complaint[0] = '\0';
        const bool changed = fabs(typed - *value) > 0;
        *value = typed;
        return changed;
    }
    return false;
}

static bool step_value(double least, double most, double step, int by, double *value)
{
    const double stepped = fmin(fmax((floor(*value / step + 0.5) + by) * step, least), most);
    const bool changed = fabs(stepped - *value) > 0;
    *value = stepped;
    return changed;
}

static void type_into(struct ui *ui)
{
    struct ui_event *event;
    while ((event = find(ui, UI_EVENT_TEXT, UI_KEY_NONE)) != NULL) {
        const size_t used = ui->editing ? strlen(ui->edit) : 0;
        if (!ui->editing) ui->edit[0] = '\0';
        ui->editing = true;
        (void)snprintf(ui->edit + used, sizeof ui->edit - used, "%s", event->text);
        drop(ui, event);
    }
    while (ui->editing && ui_key_taken(ui, UI_KEY_BACKSPACE)) {
        const size_t used = strlen(ui->edit);
        if (used) ui->edit[used - 1] = '\0';
    }
}

static bool key_edits(struct ui *ui, const char *label, double least, double most, double step, double *value)
{
    bool changed = false;
    type_into(ui);
    if (ui_key_taken(ui, UI_KEY_ESCAPE)) ui->editing = false;
    const bool leaves = find(ui, UI_EVENT_KEY, UI_KEY_TAB) || find(ui, UI_EVENT_KEY, UI_KEY_BACK_TAB);
    if (ui->editing && (leaves || ui_key_taken(ui, UI_KEY_ENTER)))
        changed |= commit_edit(ui, label, least, most, value);
    while (ui_key_taken(ui, UI_KEY_UP)) changed |= step_value(least, most, step, 1, value);
    while (ui_key_taken(ui, UI_KEY_DOWN)) changed |= step_value(least, most, step, -1, value);
    return changed;
}

static bool pointer_edits(struct ui *ui, int id, const struct ui_box *field, double least, double most,
                          double step, double *value)
{
    double x, y;
    bool changed = false;
    if (press_taken(ui, field, &x, &y)) {
        take_focus(ui, id);
        ui->drag_from_x = x;
        ui->drag_from_value = *value;
    }
    if (ui->active == id && ui->pressed) { /* four pixels a step */
        double dragged = ui->drag_from_value;
        (void)step_value(least, most, step, (int)((ui->pointer_x - ui->drag_from_x) / (4 * ui->scale)),
                         &dragged);
        if (fabs(ui->pointer_x - ui->drag_from_x) >= 4 * ui->scale && fabs(dragged - *value) > 0) {
            *value = dragged;
            ui->editing = false;
            changed = true;
        }
    }
    struct ui_event *wheel = find(ui, UI_EVENT_WHEEL, UI_KEY_NONE);
    if (wheel && inside(field, wheel->x, wheel->y)) {
        changed |= step_value(least, most, step, wheel->steps, value);
        drop(ui, wheel);
    }
    return changed;
}

bool ui_number(struct ui *ui, struct ui_box box, const char *label, const char *unit, double least,
               double most, double step, double *value)
{
    const int id = ++ui->next_id;
    const struct ui_box field = beside_label(ui, box);
    char text[UI_TEXT_SIZE];
    bool changed = pointer_edits(ui, id, &field, least, most, step, value);
    if (ui->focus == id) changed |= key_edits(ui, label, least, most, step, value);
    if (changed) ui->complaint[0] = '\0';
    frame(ui, field, ui->focus == id);
    ui_words(ui, box, label, UI_TEXT, UI_LEFT, false);
    if (ui->focus == id && ui->editing)
        (void)snprintf(text, sizeof text, "%s|", ui->edit);
    else
        (void)snprintf(text, sizeof text, "%g %s", *value, unit);
    ui_words(ui, field, text, UI_TEXT, UI_CENTRE, ui->focus == id);
    return changed;
}

bool ui_area(struct ui *ui, struct ui_box box, double *x, double *y)
{
    double at_x, at_y;
    if (!press_taken(ui, &box, &at_x, &at_y)) return false;
    *x = (at_x - box.x) / box.width;
    *y = (at_y - box.y) / box.height;
    return true;
}
