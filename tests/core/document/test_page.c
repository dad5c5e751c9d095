/* The page of document keys says what the schema tables say. The goal of this code: a key, a range or a
 * default that changes changes docs/documents.md in the same commit. Run with --write, the program makes the
 * page anew below its marker. */
#include "core/document/schemas.h"
#include "support/near.h"

#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#define PAGE PULSEWRIGHT_SOURCE "/docs/documents.md"
static const char marker[] = "<!-- From here on made from the schema tables; see DEVELOPERS.md. -->\n";
enum { DEPTH_MAX = 8, PATH_MAX_CHARS = 512 };

static void print_choices(struct text_out *out, const struct field *field)
{
    bool first = true;
    for (int i = 0; field->choices && field->choices[i]; i++) {
        if (!*field->choices[i]) continue; /* a value without a name */
        text_out_print(out, "%s`%s`", first ? "" : ", ", field->choices[i]);
        first = false;
    }
}

static void print_bound(struct text_out *out, double least, double most, bool above)
{
    char a[32], b[32];
    if (isinf(least) && isinf(most)) {
        text_out_print(out, "any");
        return;
    }
    text_out_print(out, "%s%s to %s", above ? "above " : "", isinf(least) ? "any" : number_text(least, a),
                   isinf(most) ? "any" : number_text(most, b));
}

static void print_range(struct text_out *out, const struct field *field)
{
    switch (field->type) {
    case FIELD_NUMBER:
    case FIELD_COUNT:
    case FIELD_RANGE: print_bound(out, field->least, field->most, field->above_least); break;
    case FIELD_OWN:
        if (field->most > field->least) print_bound(out, field->least, field->most, true);
        break;
    case FIELD_LIST:
    case FIELD_ARRAY:
        print_bound(out, field->least, field->most, false);
        text_out_print(out, " items");
        break;
    case FIELD_CHOICE:
    case FIELD_SWITCH: print_choices(out, field); break;
    case FIELD_CHOICES:
    case FIELD_BITS:
        text_out_print(out, "a list of ");
        print_choices(out, field);
        break;
    case FIELD_FIXED:
    case FIELD_FIXED64: print_bound(out, field->least, field->most, false); break;
    case FIELD_TEXT: text_out_print(out, "text"); break;
    case FIELD_CODE: text_out_print(out, "letters, digits, dashes"); break;
    case FIELD_DATE: text_out_print(out, "YYYY-MM-DD"); break;
    case FIELD_NUMBERS: text_out_print(out, "a list of numbers"); break;
    case FIELD_MAP: break;
    }
}

static void print_absent(struct text_out *out, const struct field *field)
{
    char number[32];
    if (field->required) {
        text_out_print(out, "needed");
    } else if (field->type == FIELD_NUMBER && !isnan(field->fallback)) {
        text_out_print(out, "%s", number_text(field->fallback, number));
    } else if (field->type == FIELD_COUNT) {
        text_out_print(out, "%s", number_text(field->fallback, number));
    } else if (field->type == FIELD_CHOICE) {
        text_out_print(out, "`%s`", field->choices[(int)field->fallback]);
    } else if (field->type == FIELD_SWITCH) {
        text_out_print(out, "`%s`", field->choices[0]);
    }
}

static void print_fields(struct text_out *out, const struct schema *schema, const char *prefix, int depth)
{
    assert_true(depth < DEPTH_MAX);
    for (const struct field *field = schema->fields; field->key; field++) {
        char path[PATH_MAX_CHARS];
        const bool many = field->type == FIELD_LIST || field->type == FIELD_ARRAY;
        snprintf(path, sizeof path, "%s%s%s", prefix, field->key, many ? "[]" : "");
        text_out_print(out, "| `%s` | ", path);
        print_range(out, field);
        text_out_print(out, " | ");
        print_absent(out, field);
        text_out_print(out, " | %s |\n", field->help ? field->help : "");
        if (!field->of) continue;
        strncat(path, ".", sizeof path - strlen(path) - 1);
        print_fields(out, field->of, path, depth + 1);
    }
}

static void print_page(struct text_out *out)
{
    static const struct {
        const char *title;
        enum document_kind kind;
        const struct schema *schema;
    } pages[] = {{"Profile", DOCUMENT_PROFILE, &profile_schema},
                 {"Demand", DOCUMENT_DEMAND, &demand_schema},
                 {"Stimulator", DOCUMENT_STIMULATOR, &stimulator_schema},
                 {"Hookup", DOCUMENT_HOOKUP, &hookup_schema},
                 {"Train", DOCUMENT_TRAIN, &train_schema},
                 {"Recordings", DOCUMENT_RECORDINGS, &recordings_schema},
                 {"Plan", DOCUMENT_PLAN, &plan_schema}};
    _Static_assert(sizeof pages / sizeof *pages == DOCUMENT_KINDS, "every kind has its table");
    for (size_t i = 0; i < sizeof pages / sizeof *pages; i++) {
        text_out_print(out, "\n## %s\n`format: %s`\n\n", pages[i].title, document_kind_format(pages[i].kind));
        text_out_print(out, "| key | may hold | where absent | what it is |\n|---|---|---|---|\n");
        print_fields(out, pages[i].schema, "", 0);
    }
}

/* The page as it stands; the table part begins behind the marker. Freed by the caller. */
static char *read_page(char **tables)
{
    struct document_bytes bytes;
    struct message why;
    assert_status(document_read_bytes(PAGE, &bytes, &why), STATUS_OK, &why);
    char *found = strstr(bytes.data, marker);
    assert_non_null(found);
    *tables = found + sizeof marker - 1;
    return bytes.data;
}

static void page_and_tables_agree(void **state)
{
    (void)state;
    struct text_out out = {0};
    char *tables, *page = read_page(&tables);
    print_page(&out);
    assert_true(out.size > 10000);
    if (strcmp(tables, out.data) != 0)
        fail_msg("docs/documents.md is not what the schema tables say: run this test with --write");
    free(page);
    text_out_free(&out);
}

static int write_page(void)
{
    struct text_out out = {0};
    char *tables, *page = read_page(&tables);
    FILE *file = fopen(PAGE, "w");
    print_page(&out);
    if (!file) return 1;
    *tables = '\0';
    /* the head is still in memory: read_page has read the whole page */
    fprintf(file, "%s%s", page, out.data);
    free(page);
    text_out_free(&out);
    return fclose(file) != 0;
}

int main(int argc, char **argv)
{
    if (argc > 1 && strcmp(argv[1], "--write") == 0) return write_page();
    const struct CMUnitTest tests[] = {cmocka_unit_test(page_and_tables_agree)};
    return cmocka_run_group_tests(tests, NULL, NULL) != 0;
}
