/* Tables by RFC 4180: quoting (2.5 to 2.7), CRLF (2.1), a last line without one (2.2); and the project's own
 * rules: columns by name in any order, further ones ignored, a bad cell told by file:line:column. */
#include "core/document/table.h"
#include "support/near.h"

#include <stdio.h>
#include <string.h>

static enum status read_text(const char *text, struct pulses_table *table, struct message *why)
{
    char copy[1024];
    (void)snprintf(copy, sizeof copy, "%s", text);
    struct document_bytes bytes = {.path = "p.csv", .data = copy, .size = strlen(copy)};
    return pulses_parse(&bytes, table, why);
}

static void columns_stand_in_any_order_and_further_ones_are_ignored(void **state)
{
    (void)state;
    struct pulses_table table;
    struct message why = {.text = ""};
    assert_status(
        read_text(
            "\xEF\xBB\xBF"
            "note,current_ma,\"time_ms\",duration_us\r\n\"a, \"\"b\"\"\r\nc\",60.5,0,300\r\n,61,33.334,310",
            &table, &why),
        STATUS_OK, &why);
    assert_int_equal(table.pulses, 2);
    assert_near(table.pulse[0].current_ma, 60.5, 0, 0);
    assert_near(table.pulse[1].time_ms, 33.334, 0, 0);
    assert_near(table.pulse[1].duration_us, 310, 0, 0);
    assert_null(table.channel);
    pulses_free(&table);
}

static void what_is_written_reads_back_to_the_last_bit(void **state)
{
    (void)state;
    struct train_pulse pulse[2] = {{0, 300.00000000000006, 60.1}, {1.0 / 3, 0.1, 1e-7}};
    struct pulses_table made = {.pulses = 2, .pulse = pulse}, read;
    struct message why = {.text = ""};
    struct text_out out = {0};
    pulses_print(&made, "not signed, by no one", &out);
    assert_status(read_text(out.data, &read, &why), STATUS_OK, &why);
    assert_int_equal(read.pulses, 2);
    assert_memory_equal(read.pulse, pulse, sizeof pulse);
    pulses_free(&read);
    text_out_free(&out);
}

static void a_bad_table_is_told_by_its_place(void **state)
{
    (void)state;
    static const struct {
        const char *text, *place, *phrase;
    } bads[] = {
        {"", "p.csv:1:1: ", "header"},
        {"time_ms,duration_us\n0,300\n", "p.csv:1:1: current_ma", "column"},
        {"time_ms,duration_us,current_ma\n0,300,nan\n", "p.csv:2:3: current_ma", "nan"},
        {"time_ms,duration_us,current_ma\n0,300,60\n1,300,\n", "p.csv:3:3: current_ma", "nothing"},
        {"time_ms,duration_us,current_ma\n0,-1,60\n", "p.csv:2:2: duration_us", "-1"},
        {"time_ms,duration_us,current_ma\n0,300\n", "p.csv:2:1: row", "2 cells"},
        {"time_ms,duration_us,current_ma\n5,300,60\n4,300,60\n", "p.csv:3:1: time_ms", "row before"},
        {"time_ms,duration_us,current_ma\n5,300,60\n5,300,60\n", "p.csv:3:1: time_ms", "1 us"},
        {"time_ms,duration_us,current_ma\n5,300,\"60\n", "p.csv:2:1: row", "quote"},
        {"time_ms,duration_us,current_ma,channel\n5,300,60,0\n", "p.csv:2:4: channel", "0"},
        {"time_ms,duration_us,current_ma,channel\n5,300,60,1.5\n", "p.csv:2:4: channel", "1.5"},
    };
    for (size_t i = 0; i < sizeof bads / sizeof bads[0]; i++) {
        struct pulses_table table;
        struct message why = {.text = ""};
        assert_status(read_text(bads[i].text, &table, &why), STATUS_DOCUMENT, &why);
        if (strncmp(why.text, bads[i].place, strlen(bads[i].place)) != 0 || !strstr(why.text, bads[i].phrase))
            fail_msg("row %zu: %s", i, why.text);
    }
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(columns_stand_in_any_order_and_further_ones_are_ignored),
        cmocka_unit_test(what_is_written_reads_back_to_the_last_bit),
        cmocka_unit_test(a_bad_table_is_told_by_its_place)};
    return cmocka_run_group_tests(tests, NULL, NULL) != 0;
}
