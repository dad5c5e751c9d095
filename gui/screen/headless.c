/* The panel without a window: the same widgets and painter, driven by a script. The goal of this code: what
 * is tested is what is shown. */
#include "core/document/document.h"
#include "gui/screen/window.h"

#include <stdio.h>
#include <stdlib.h>
#include <string.h>

static const struct {
    const char *word;
    enum ui_key key;
} key_words[] = {{"Tab", UI_KEY_TAB},
                 {"BackTab", UI_KEY_BACK_TAB},
                 {"Enter", UI_KEY_ENTER},
                 {"Escape", UI_KEY_ESCAPE},
                 {"Up", UI_KEY_UP},
                 {"Down", UI_KEY_DOWN},
                 {"Left", UI_KEY_LEFT},
                 {"Right", UI_KEY_RIGHT},
                 {"Backspace", UI_KEY_BACKSPACE},
                 {"Undo", UI_KEY_UNDO},
                 {"Redo", UI_KEY_REDO},
                 {"Space", UI_KEY_SPACE}};

static bool post_line(struct ui *ui, const char *line)
{
    char word[32] = "";
    double x = 0, y = 0;
    int steps = 0;
    if (sscanf(line, "key %31s", word) == 1) {
        for (size_t i = 0; i < sizeof key_words / sizeof key_words[0]; i++) {
            if (strcmp(key_words[i].word, word) != 0) continue;
            ui_post(ui, (struct ui_event){.kind = UI_EVENT_KEY, .key = key_words[i].key});
            return true;
        }
        return false;
    }
    if (sscanf(line, "text %31s", word) == 1) {
        for (const char *c = word; *c; c++)
            ui_post(ui, (struct ui_event){.kind = UI_EVENT_TEXT, .text = {*c}});
        return true;
    }
    if (sscanf(line, "click %lf %lf", &x, &y) == 2) {
        ui_post(ui, (struct ui_event){.kind = UI_EVENT_PRESS, .x = x, .y = y});
        ui_post(ui, (struct ui_event){.kind = UI_EVENT_RELEASE, .x = x, .y = y});
        return true;
    }
    if (sscanf(line, "press %lf %lf", &x, &y) == 2)
        ui_post(ui, (struct ui_event){.kind = UI_EVENT_PRESS, .x = x, .y = y});
    else if (sscanf(line, "move %lf %lf", &x, &y) == 2)
        ui_post(ui, (struct ui_event){.kind = UI_EVENT_MOVE, .x = x, .y = y});
    else if (sscanf(line, "release %lf %lf", &x, &y) == 2)
        ui_post(ui, (struct ui_event){.kind = UI_EVENT_RELEASE, .x = x, .y = y});
    else if (sscanf(line, "wheel %lf %lf %d", &x, &y, &steps) == 3)
        ui_post(ui, (struct ui_event){.kind = UI_EVENT_WHEEL, .x = x, .y = y, .steps = steps});
    else
        return line[0] == '\0' || line[0] == '#';
    return true;
}

/* Frames until every event has been in one. */
static void one_frame(const struct window_run *run, struct ui *ui)
{
    do {
        ui_begin(ui, run->width, run->height, run->width >= 3000 ? 2 : 1);
        run->turn(run->context, ui);
        ui_end(ui);
    } while (ui_pending(ui));
}

static enum status play(const struct window_run *run, struct ui *ui, const char *script, struct message *why)
{
    struct document_bytes bytes;
    enum status status = document_read_bytes(script, &bytes, why);
    if (status != STATUS_OK) return status;
    char *save = NULL;
    int number = 0;
    for (char *line = strtok_r(bytes.data, "\n", &save); line && status == STATUS_OK;
         line = strtok_r(NULL, "\n", &save)) {
        number++;
        if (post_line(ui, line))
            one_frame(run, ui);
        else
            status = status_fail(
                why, STATUS_DOCUMENT,
                "%s:%d:1: line: holds %.60s, may hold key, text, click, press, move, release or wheel",
                script, number, line);
    }
    document_bytes_free(&bytes);
    return status;
}

enum status window_headless(const struct window_run *run, const char *script, struct message *why)
{
    struct ui *ui = malloc(sizeof *ui);
    enum status status = ui ? STATUS_OK : status_fail(why, STATUS_INTERNAL, "no memory");
    if (status == STATUS_OK) {
        ui_init(ui);
        one_frame(run, ui);
        if (script) status = play(run, ui, script, why);
        for (long frame = 1; frame < run->frames && status == STATUS_OK; frame++) one_frame(run, ui);
    }
    if (status == STATUS_OK && run->picture) {
        one_frame(run, ui); /* what the last event changed */
        cairo_surface_t *surface = cairo_image_surface_create(CAIRO_FORMAT_ARGB32, run->width, run->height);
        cairo_t *cairo = cairo_create(surface);
        paint_commands(cairo, ui, run->dark, run->figure, run->context);
        cairo_destroy(cairo);
        if (cairo_surface_write_to_png(surface, run->picture) != CAIRO_STATUS_SUCCESS)
            status = status_fail(why, STATUS_USAGE, "%s: can not be written", run->picture);
        cairo_surface_destroy(surface);
    }
    free(ui);
    return status;
}
