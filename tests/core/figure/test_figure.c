/* Figures and the sheet: ticks, contrast, labels that keep clear, files by their ending, words without key
 * names. */
#include "core/document/document.h"
#include "core/figure/canvas.h"
#include "core/figure/sheet.h"
#include "core/report/cautions.h"
#include "core/report/option.h"
#include "support/near.h"

#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <unistd.h>

/* Heckbert 1990: ticks at 1, 2 or 5 times a power of ten, inside the axis. */
static void ticks_are_nice_and_inside(void **state)
{
    (void)state;
    srand(1);
    for (int i = 0; i < 2000; i++) {
        const double low = (rand() % 2000 - 1000) / 7.0,
                     span = pow(10, rand() % 9 - 4) * (1 + rand() % 90 / 10.0);
        const struct axis axis = axis_make(low, low + span, 3 + rand() % 8, rand() % 2, rand() % 2);
        assert_true(axis.ticks >= 1);
        for (size_t t = 0; t < axis.ticks; t++)
            assert_between(axis.tick[t], axis.low - 1e-9 * span, axis.high + 1e-9 * span);
        if (axis.ticks < 2) continue;
        const double step = axis.tick[1] - axis.tick[0], lead = step / pow(10, floor(log10(step) + 1e-9));
        assert_true(fabs(lead - 1) < 1e-6 || fabs(lead - 2) < 1e-6 || fabs(lead - 5) < 1e-6);
    }
}

/* W3C WCAG 2.1: black on white is 21:1; text needs 4.5:1 (1.4.3). */
static void every_ink_can_be_read_on_its_paper(void **state)
{
    (void)state;
    assert_near(colour_contrast((struct colour){0, 0, 0}, (struct colour){1, 1, 1}), 21, 1e-9, 0);
    for (int dark = 0; dark < 2; dark++)
        for (int ink = INK_TEXT; ink < INKS; ink++)
            if (ink != INK_GRID)
                assert_true(colour_contrast(ink_colour((enum ink)ink, dark), ink_colour(INK_PAPER, dark)) >=
                            4.5);
}

static void labels_never_stand_on_each_other(void **state)
{
    (void)state;
    static const int sizes[][2] = {{1024, 700}, {1280, 800}, {1920, 1080}, {3840, 2160}};
    for (int s = 0; s < 4; s++) {
        cairo_surface_t *surface = cairo_image_surface_create(CAIRO_FORMAT_ARGB32, sizes[s][0], sizes[s][1]);
        cairo_t *cairo = cairo_create(surface);
        struct canvas canvas = canvas_begin(cairo, sizes[s][0], sizes[s][1], NULL);
        const struct box within = {0, 0, sizes[s][0], sizes[s][1]};
        srand(3);
        for (int i = 0; i < 60; i++)
            (void)canvas_label(&canvas, "peak 123 N", rand() % sizes[s][0], rand() % 200, within, INK_TEXT);
        assert_true(canvas.labels > 10);
        for (size_t a = 0; a < canvas.labels; a++) {
            assert_true(canvas.label[a].x >= 0 && canvas.label[a].x + canvas.label[a].width <= sizes[s][0]);
            for (size_t b = 0; b < a; b++) assert_false(box_meets(canvas.label[a], canvas.label[b]));
        }
        cairo_destroy(cairo);
        cairo_surface_destroy(surface);
    }
}

static struct trace flat_trace(size_t samples, double *store)
{
    struct trace trace = {.samples = samples};
    double **columns[] = {&trace.time_ms, &trace.force_n, &trace.capacity, &trace.potentiation,
                          &trace.activation};
    for (size_t c = 0; c < 5; c++) *columns[c] = store + c * samples;
    for (size_t i = 0; i < samples; i++) {
        trace.time_ms[i] = (double)i;
        trace.force_n[i] = 50;
        trace.capacity[i] = trace.potentiation[i] = 1;
        trace.activation[i] = 0.5;
    }
    return trace;
}

/* Rows of ink in a column of the picture, from the top of the pulses' stave down to its base. */
static int ink_height(cairo_surface_t *surface, int x, int from, int to)
{
    const unsigned char *data = cairo_image_surface_get_data(surface);
    const int stride = cairo_image_surface_get_stride(surface);
    int rows = 0;
    for (int y = from; y < to; y++) {
        const unsigned char *pixel = data + y * stride + 4 * x;
        rows += pixel[0] > 120 && pixel[2] < 60; /* the blue of the strokes */
    }
    return rows;
}

static void strokes_are_as_high_as_their_current(void **state)
{
    (void)state;
    static double store[5 * 1001];
    const struct trace trace = flat_trace(1001, store);
    const struct train_pulse pulses[] = {{250, 500, 100}, {750, 500, 50}};
    const struct figure_score score = {.pulses = pulses,
                                       .pulse_count = 2,
                                       .trace = &trace,
                                       .from_ms = 0,
                                       .to_ms = 1000,
                                       .target_n = (double)NAN,
                                       .hold_from_ms = (double)NAN,
                                       .hold_to_ms = (double)NAN,
                                       .cursor_ms = (double)NAN};
    cairo_surface_t *surface = cairo_image_surface_create(CAIRO_FORMAT_ARGB32, 1000, 700);
    cairo_t *cairo = cairo_create(surface);
    figure_score_draw(cairo, 1000, 700, &score, &(struct figure_style){.scale = 1});
    cairo_surface_flush(surface);
    int tall = 0, low = 0;
    for (int x = 60; x < 980; x++) {
        const int rows = ink_height(surface, x, 20, 185);
        if (x < 500 && rows > tall) tall = rows;
        if (x >= 500 && rows > low) low = rows;
    }
    assert_true(tall > 60);
    assert_between((double)tall / low, 1.9, 2.1);
    cairo_destroy(cairo);
    cairo_surface_destroy(surface);
}

static void draw_dot(cairo_t *cairo, double width, double height, const void *context)
{
    (void)context;
    cairo_arc(cairo, width / 2, height / 2, 10, 0, 6.28);
    cairo_fill(cairo);
}

static void file_is_what_its_ending_says_and_nothing_is_overwritten(void **state)
{
    (void)state;
    static const struct {
        const char *ending, *magic;
    } forms[] = {{"png", "\x89PNG"}, {"svg", "<?xml"}, {"pdf", "%PDF-"}};
    struct message why;
    for (size_t i = 0; i < 3; i++) {
        char path[64];
        struct document_bytes bytes;
        (void)snprintf(path, sizeof path, "figure-%ld.%s", (long)getpid(), forms[i].ending);
        assert_status(figure_write(path, 200, 100, draw_dot, NULL, false, &why), STATUS_OK, &why);
        assert_int_equal(figure_write(path, 200, 100, draw_dot, NULL, false, &why), STATUS_USAGE);
        assert_status(document_read_bytes(path, &bytes, &why), STATUS_OK, &why);
        assert_memory_equal(bytes.data, forms[i].magic, strlen(forms[i].magic));
        document_bytes_free(&bytes);
        (void)unlink(path);
    }
    assert_int_equal(figure_write("figure.gif", 200, 100, draw_dot, NULL, false, &why), STATUS_USAGE);
}

static void sheet_says_it_in_words(void **state)
{
    (void)state;
    struct profile profile;
    struct message why;
    struct sheet *sheet = malloc(sizeof *sheet);
    uint8_t first[DIGEST_SIZE], second[DIGEST_SIZE];
    assert_status(profile_load(PULSEWRIGHT_SOURCE "/profiles/people/p-017.yaml", &profile, &why), STATUS_OK,
                  &why);
    sheet_of_profile(&profile, NOT_SIGNED_TEXT, (struct date){2027, 1, 1}, sheet);
    assert_int_equal(sheet->line[0].style, SHEET_VERDICT);
    bool old = false;
    size_t cautions_found = 0;
    for (size_t i = 0; i < sheet->lines; i++) {
        assert_null(strchr(sheet->line[i].text, '_')); /* key names have it, words do not */
        old |= strstr(sheet->line[i].text, "days old") != NULL;
        for (size_t c = 0; c < cautions_count; c++)
            cautions_found += strstr(sheet->line[i].text, cautions[c].text) != NULL;
    }
    assert_true(old);
    assert_int_equal(cautions_found, cautions_count);
    sheet_digest(sheet, first);
    sheet->line[1].text[0] ^= 1;
    sheet_digest(sheet, second);
    assert_memory_not_equal(first, second, sizeof first);
    free(sheet);
    profile_free(&profile);
}

/* Every channel full of blocks, figures and attention: the cautions and the place to sign still stand at its
 * end. */
static void the_longest_sheet_keeps_its_cautions_and_its_end(void **state)
{
    (void)state;
    struct plan *plan = calloc(1, sizeof *plan);
    struct sheet *sheet = malloc(sizeof *sheet);
    plan->channels = STIMULATOR_CHANNELS_MAX;
    plan->channel = calloc(plan->channels, sizeof *plan->channel);
    plan->notes = PLAN_NOTES_MAX;
    struct plan_block *block = calloc(2 * SHEET_BLOCKS_MAX, sizeof *block);
    for (unsigned b = 0; b < 2 * SHEET_BLOCKS_MAX; b++)
        block[b] =
            (struct plan_block){.first = b + 1, .count = 1, .settings = {.frequency_pps = 30, .opening = 1}};
    for (size_t c = 0; c < plan->channels; c++) {
        plan->channel[c].channel = (unsigned)c + 1;
        plan->channel[c].demand.contractions = 9;
        plan->channel[c].blocks = 2 * SHEET_BLOCKS_MAX;
        plan->channel[c].block = block;
    }
    plan->ledger.figures = plan->channels * (DOSE_FIGURES - 1);
    plan->ledger.figure = calloc(plan->ledger.figures, sizeof *plan->ledger.figure);
    plan->ledger.shown = plan->channels * 5;
    plan->ledger.shown_figure = calloc(plan->ledger.shown, sizeof *plan->ledger.shown_figure);
    for (size_t i = 0; i < plan->ledger.shown; i++) plan->ledger.shown_figure[i].attention = true;
    sheet_of_plan(plan, NOT_SIGNED_TEXT, sheet);
    size_t cautions_found = 0;
    bool place_to_sign = false;
    for (size_t i = 0; i < sheet->lines; i++) {
        for (size_t c = 0; c < cautions_count; c++)
            cautions_found += strstr(sheet->line[i].text, cautions[c].text) != NULL;
        place_to_sign |= strstr(sheet->line[i].text, "signature") != NULL;
    }
    assert_int_equal(cautions_found, cautions_count);
    assert_true(place_to_sign);
    assert_true(sheet->lines > 400);
    free(plan->ledger.figure);
    free(plan->ledger.shown_figure);
    free(plan->channel);
    free(block);
    free(plan);
    free(sheet);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(ticks_are_nice_and_inside),
        cmocka_unit_test(every_ink_can_be_read_on_its_paper),
        cmocka_unit_test(labels_never_stand_on_each_other),
        cmocka_unit_test(strokes_are_as_high_as_their_current),
        cmocka_unit_test(file_is_what_its_ending_says_and_nothing_is_overwritten),
        cmocka_unit_test(sheet_says_it_in_words),
        cmocka_unit_test(the_longest_sheet_keeps_its_cautions_and_its_end),
    };
    return cmocka_run_group_tests(tests, NULL, NULL) != 0;
}
