/* Widgets without a window: what is typed, stepped and dragged, read off the command list. */
#include "gui/widget/ui.h"
#include "support/near.h"

#include <string.h>

static struct ui ui;
static double frequency, current;
static int opening;
static const char *const openings[] = {"single", "doublet", NULL};
static const struct ui_box first = {0, 0, 200, 20}, second = {0, 30, 200, 20}, third = {0, 60, 200, 20};

/* Frames until no event waits. */
static bool one_frame(void)
{
    bool changed = false;
    do {
        ui_begin(&ui, 300, 200, 1);
        changed |= ui_number(&ui, first, "Frequency", "Hz", 1, 100, 1, &frequency);
        changed |= ui_number(&ui, second, "Current", "mA", 0, 80, 0.5, &current);
        changed |= ui_choice(&ui, third, "Opening", openings, &opening);
        ui_end(&ui);
    } while (ui_pending(&ui));
    return changed;
}

static void begin(void)
{
    ui_init(&ui);
    frequency = 30;
    current = 40;
    opening = 0;
    (void)one_frame();
}

static void post_key(enum ui_key key)
{
    ui_post(&ui, (struct ui_event){.kind = UI_EVENT_KEY, .key = key});
}

static void type(const char *text)
{
    for (; *text; text++) ui_post(&ui, (struct ui_event){.kind = UI_EVENT_TEXT, .text = {*text}});
}

static bool shows(const char *text)
{
    for (size_t i = 0; i < ui.commands; i++)
        if (ui.command[i].kind == UI_WORDS && strcmp(ui.command[i].text, text) == 0) return true;
    return false;
}

static void typing_three_five_enter_sets_thirty_five(void **state)
{
    (void)state;
    begin();
    post_key(UI_KEY_TAB);
    (void)one_frame();
    assert_int_equal(ui.focus, 1);
    type("35");
    assert_false(one_frame());
    assert_true(shows("35|"));
    assert_near(frequency, 30, 0, 0); /* not before it is entered */
    post_key(UI_KEY_ENTER);
    assert_true(one_frame());
    assert_near(frequency, 35, 0, 0);
    (void)one_frame();
    assert_true(shows("35 Hz"));
}

static void out_of_range_says_why_and_changes_nothing(void **state)
{
    (void)state;
    begin();
    post_key(UI_KEY_TAB);
    (void)one_frame();
    type("120");
    post_key(UI_KEY_ENTER);
    assert_false(one_frame());
    assert_near(frequency, 30, 0, 0);
    assert_string_equal(ui.complaint, "Frequency: 120, may be 1 to 100");
    type("3x");
    post_key(UI_KEY_ENTER);
    assert_false(one_frame());
    assert_string_equal(ui.complaint, "Frequency: \"3x\" is no number");
    type("31");
    post_key(UI_KEY_ENTER);
    assert_true(one_frame());
    assert_string_equal(ui.complaint, "");
}

static void what_is_typed_after_a_tab_reaches_the_next_field_however_fast(void **state)
{
    (void)state;
    begin();
    post_key(UI_KEY_TAB);
    type("25");
    post_key(UI_KEY_TAB);
    type("12.5");
    post_key(UI_KEY_ENTER);
    assert_true(one_frame());
    assert_near(frequency, 25, 0, 0);
    assert_near(current, 12.5, 0, 0);
}

static void escape_leaves_the_value(void **state)
{
    (void)state;
    begin();
    post_key(UI_KEY_TAB);
    (void)one_frame();
    type("77");
    post_key(UI_KEY_ESCAPE);
    (void)one_frame();
    post_key(UI_KEY_ENTER);
    (void)one_frame();
    assert_near(frequency, 30, 0, 0);
}

static void tab_enters_what_was_typed_and_moves_on(void **state)
{
    (void)state;
    begin();
    post_key(UI_KEY_TAB);
    (void)one_frame();
    type("42");
    post_key(UI_KEY_TAB);
    assert_true(one_frame());
    assert_near(frequency, 42, 0, 0);
    assert_int_equal(ui.focus, 2);
    post_key(UI_KEY_BACK_TAB);
    (void)one_frame();
    assert_int_equal(ui.focus, 1);
    post_key(UI_KEY_BACK_TAB);
    (void)one_frame();
    assert_int_equal(ui.focus, 3); /* round the corner */
}

static void arrows_and_wheel_step_and_stay_in_range(void **state)
{
    (void)state;
    begin();
    post_key(UI_KEY_TAB);
    (void)one_frame();
    post_key(UI_KEY_UP);
    assert_true(one_frame());
    assert_near(frequency, 31, 0, 0);
    ui_post(&ui, (struct ui_event){.kind = UI_EVENT_WHEEL, .x = 150, .y = 40, .steps = 2});
    assert_true(one_frame());
    assert_near(current, 41, 0, 0);
    current = 80;
    ui_post(&ui, (struct ui_event){.kind = UI_EVENT_WHEEL, .x = 150, .y = 40, .steps = 5});
    assert_false(one_frame());
    assert_near(current, 80, 0, 0);
}

static void dragging_moves_a_step_each_four_pixels(void **state)
{
    (void)state;
    begin();
    ui_post(&ui, (struct ui_event){.kind = UI_EVENT_PRESS, .x = 150, .y = 10});
    (void)one_frame();
    ui_post(&ui, (struct ui_event){.kind = UI_EVENT_MOVE, .x = 170, .y = 10});
    assert_true(one_frame());
    assert_near(frequency, 35, 0, 0);
    ui_post(&ui, (struct ui_event){.kind = UI_EVENT_RELEASE, .x = 170, .y = 10});
    (void)one_frame();
    ui_post(&ui, (struct ui_event){.kind = UI_EVENT_MOVE, .x = 190, .y = 10});
    assert_false(one_frame());
    assert_near(frequency, 35, 0, 0);
}

static void choice_turns_by_key_and_click(void **state)
{
    (void)state;
    begin();
    ui_post(&ui, (struct ui_event){.kind = UI_EVENT_PRESS, .x = 190, .y = 70});
    ui_post(&ui, (struct ui_event){.kind = UI_EVENT_RELEASE, .x = 190, .y = 70});
    assert_true(one_frame());
    assert_int_equal(opening, 1);
    post_key(UI_KEY_RIGHT);
    assert_true(one_frame());
    assert_int_equal(opening, 0);
}

static void focused_field_has_a_frame_of_its_own(void **state)
{
    (void)state;
    begin();
    post_key(UI_KEY_TAB);
    (void)one_frame();
    (void)one_frame();
    unsigned accents = 0;
    for (size_t i = 0; i < ui.commands; i++)
        accents += ui.command[i].kind == UI_FRAME && ui.command[i].ink == UI_ACCENT;
    assert_int_equal(accents, 1);
}

static void too_many_commands_are_dropped_not_written_beyond(void **state)
{
    (void)state;
    begin();
    ui_begin(&ui, 300, 200, 1);
    for (int i = 0; i < 2 * UI_COMMANDS_MAX; i++) ui_fill(&ui, first, UI_PAPER);
    ui_end(&ui);
    assert_int_equal(ui.commands, UI_COMMANDS_MAX);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(typing_three_five_enter_sets_thirty_five),
        cmocka_unit_test(out_of_range_says_why_and_changes_nothing),
        cmocka_unit_test(what_is_typed_after_a_tab_reaches_the_next_field_however_fast),
        cmocka_unit_test(escape_leaves_the_value),
        cmocka_unit_test(tab_enters_what_was_typed_and_moves_on),
        cmocka_unit_test(arrows_and_wheel_step_and_stay_in_range),
        cmocka_unit_test(dragging_moves_a_step_each_four_pixels),
        cmocka_unit_test(choice_turns_by_key_and_click),
        cmocka_unit_test(focused_field_has_a_frame_of_its_own),
        cmocka_unit_test(too_many_commands_are_dropped_not_written_beyond),
    };
    return cmocka_run_group_tests(tests, NULL, NULL) != 0;
}
