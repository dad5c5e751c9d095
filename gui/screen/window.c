/* The SDL2 window. The goal of this code: the newest state is on the screen, and an idle panel costs nothing:
 * it waits for events. */
#include "gui/screen/window.h"

#include <SDL.h>
#include <stdlib.h>
#include <string.h>

enum { IDLE_MS = 400 };

struct screen {
    SDL_Window *window;
    SDL_Renderer *renderer;
    SDL_Texture *texture;
    cairo_surface_t *surface;
    int width, height; /* pixels */
    double scale;
    bool closed;
};

static enum ui_key key_of(const SDL_Keysym *key)
{
    const bool control = (key->mod & KMOD_CTRL) != 0, shift = (key->mod & KMOD_SHIFT) != 0;
    switch (key->sym) {
    case SDLK_TAB: return shift ? UI_KEY_BACK_TAB : UI_KEY_TAB;
    case SDLK_RETURN:
    case SDLK_KP_ENTER: return UI_KEY_ENTER;
    case SDLK_ESCAPE: return UI_KEY_ESCAPE;
    case SDLK_UP: return UI_KEY_UP;
    case SDLK_DOWN: return UI_KEY_DOWN;
    case SDLK_LEFT: return UI_KEY_LEFT;
    case SDLK_RIGHT: return UI_KEY_RIGHT;
    case SDLK_BACKSPACE: return UI_KEY_BACKSPACE;
    case SDLK_SPACE: return UI_KEY_SPACE;
    case SDLK_z: return control ? (shift ? UI_KEY_REDO : UI_KEY_UNDO) : UI_KEY_NONE;
    case SDLK_y: return control ? UI_KEY_REDO : UI_KEY_NONE;
    default: return UI_KEY_NONE;
    }
}

static void take(struct screen *screen, struct ui *ui, const SDL_Event *event)
{
    struct ui_event made = {.kind = UI_EVENT_MOVE};
    int x = 0, y = 0;
    if (event->type == SDL_QUIT || (event->type == SDL_KEYDOWN && event->key.keysym.sym == SDLK_q &&
                                    (event->key.keysym.mod & KMOD_CTRL)))
        screen->closed = true;
    if (event->type == SDL_KEYDOWN) {
        made = (struct ui_event){.kind = UI_EVENT_KEY, .key = key_of(&event->key.keysym)};
        if (made.key != UI_KEY_NONE) ui_post(ui, made);
    } else if (event->type == SDL_TEXTINPUT && strcmp(event->text.text, " ") != 0) {
        made.kind = UI_EVENT_TEXT;
        (void)SDL_strlcpy(made.text, event->text.text, sizeof made.text);
        ui_post(ui, made);
    } else if (event->type == SDL_MOUSEBUTTONDOWN || event->type == SDL_MOUSEBUTTONUP) {
        made =
            (struct ui_event){.kind = event->type == SDL_MOUSEBUTTONDOWN ? UI_EVENT_PRESS : UI_EVENT_RELEASE,
                              .x = event->button.x * screen->scale,
                              .y = event->button.y * screen->scale};
        ui_post(ui, made);
    } else if (event->type == SDL_MOUSEMOTION) {
        made.x = event->motion.x * screen->scale;
        made.y = event->motion.y * screen->scale;
        ui_post(ui, made);
    } else if (event->type == SDL_MOUSEWHEEL) {
        (void)SDL_GetMouseState(&x, &y);
        ui_post(ui, (struct ui_event){.kind = UI_EVENT_WHEEL,
                                      .x = x * screen->scale,
                                      .y = y * screen->scale,
                                      .steps = event->wheel.y});
    }
}

/* High density: the picture has the renderer's pixels, text grows with them. */
static bool fit(struct screen *screen)
{
    int width = 0, height = 0, wide = 0, high = 0;
    SDL_GetWindowSize(screen->window, &wide, &high);
    if (SDL_GetRendererOutputSize(screen->renderer, &width, &height) != 0 || width < 1 || height < 1)
        return false;
    screen->scale = wide > 0 ? (double)width / wide : 1;
    if (screen->surface && width == screen->width && height == screen->height) return true;
    if (screen->texture) SDL_DestroyTexture(screen->texture);
    if (screen->surface) cairo_surface_destroy(screen->surface);
    screen->width = width;
    screen->height = height;
    screen->surface = cairo_image_surface_create(CAIRO_FORMAT_ARGB32, width, height);
    screen->texture = SDL_CreateTexture(screen->renderer, SDL_PIXELFORMAT_ARGB8888,
                                        SDL_TEXTUREACCESS_STREAMING, width, height);
    return screen->texture != NULL;
}

static void draw(struct screen *screen, struct ui *ui, const struct window_run *run)
{
    ui_begin(ui, screen->width, screen->height, screen->scale);
    run->turn(run->context, ui);
    ui_end(ui);
    cairo_t *cairo = cairo_create(screen->surface);
    paint_commands(cairo, ui, run->dark, run->figure, run->context);
    cairo_destroy(cairo);
    cairo_surface_flush(screen->surface);
    (void)SDL_UpdateTexture(screen->texture, NULL, cairo_image_surface_get_data(screen->surface),
                            cairo_image_surface_get_stride(screen->surface));
    (void)SDL_RenderCopy(screen->renderer, screen->texture, NULL, NULL);
    SDL_RenderPresent(screen->renderer);
}

/* Waits for something to happen, takes all that did, up to a key. A frame more follows each event, so that what it
 * changed is seen by every widget. */
static bool wait_for_events(struct screen *screen, struct ui *ui, bool again)
{
    SDL_Event event;
    bool some = again ? SDL_PollEvent(&event) != 0 : SDL_WaitEventTimeout(&event, IDLE_MS) != 0;
    const bool any = some;
    while (some) {
        take(screen, ui, &event);
        some = ui->posts < UI_EVENTS_MAX / 2 && SDL_PollEvent(&event) != 0;
    }
    return any;
}

enum status window_main(const struct window_run *run, struct message *why)
{
    struct screen screen = {0};
    struct ui *ui = malloc(sizeof *ui);
    enum status status = STATUS_OK;
    if (!ui) return status_fail(why, STATUS_INTERNAL, "no memory");
    ui_init(ui);
    if (SDL_Init(SDL_INIT_VIDEO) != 0)
        status = status_fail(why, STATUS_DEVICE, "no screen: %s (--frames 1 --picture FILE needs none)",
                             SDL_GetError());
    if (status == STATUS_OK)
        screen.window =
            SDL_CreateWindow(run->title, SDL_WINDOWPOS_CENTERED, SDL_WINDOWPOS_CENTERED, run->width,
                             run->height, SDL_WINDOW_RESIZABLE | SDL_WINDOW_ALLOW_HIGHDPI);
    if (screen.window) screen.renderer = SDL_CreateRenderer(screen.window, -1, SDL_RENDERER_SOFTWARE);
    if (status == STATUS_OK && !screen.renderer)
        status = status_fail(why, STATUS_DEVICE, "no window: %s", SDL_GetError());
    if (screen.window) SDL_SetWindowMinimumSize(screen.window, 800, 560);
    int settling =
        2; /* frames still to draw: one more follows each event, then nothing is drawn until the next */
    for (long frame = 0; status == STATUS_OK && !screen.closed && (run->frames < 0 || frame < run->frames);
         frame++) {
        if (!fit(&screen)) break;
        if (settling > 0) draw(&screen, ui, run);
        settling = wait_for_events(&screen, ui, settling > 1 || ui_pending(ui)) || ui_pending(ui) ? 2
                   : settling > 0 ? settling - 1
                                  : 0;
    }
    if (status == STATUS_OK && run->picture && screen.surface &&
        cairo_surface_write_to_png(screen.surface, run->picture) != CAIRO_STATUS_SUCCESS)
        status = status_fail(why, STATUS_USAGE, "%s: can not be written", run->picture);
    if (screen.surface) cairo_surface_destroy(screen.surface);
    if (screen.texture) SDL_DestroyTexture(screen.texture);
    if (screen.renderer) SDL_DestroyRenderer(screen.renderer);
    if (screen.window) SDL_DestroyWindow(screen.window);
    SDL_Quit();
    free(ui);
    return status;
}
