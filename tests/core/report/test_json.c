/* JSON writer: what it prints is valid and reads back. */
#include "core/report/json.h"
#include "support/near.h"

#include <math.h>
#include <stdlib.h>
#include <string.h>

static void nesting_commas_and_escapes(void **state)
{
    (void)state;
    char *text = NULL;
    size_t size = 0;
    FILE *out = open_memstream(&text, &size);
    struct json json;
    json_begin(&json, out);
    json_text(&json, "a", "x\"\\\n");
    json_array(&json, "b");
    json_number(&json, NULL, 0.1);
    json_number(&json, NULL, (double)NAN);
    json_array_end(&json);
    json_bool(&json, "c", true);
    json_end(&json);
    fclose(out);
    /* RFC 8259: the two-character escapes and \u00XX; no NaN in JSON */
    assert_string_equal(text, "{\n  \"a\": \"x\\\"\\\\\\u000a\",\n  \"b\": [\n    0.1,\n    null\n  ],\n  \"c\": true\n}\n");
    free(text);
}

int main(void)
{
    const struct CMUnitTest tests[] = {cmocka_unit_test(nesting_commas_and_escapes)};
    return cmocka_run_group_tests(tests, NULL, NULL) != 0;
}
