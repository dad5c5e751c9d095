/* Writing by schema. The goal of this code: what is written reads back as the same values, to the last bit,
 * by the same table. */
#include "core/document/schema.h"

#include <math.h>
#include <stdio.h>
#include <string.h>

static const void *at(const void *object, size_t offset)
{
    return (const char *)object + offset;
}

static bool is_plain_safe(const char *text)
{
    if (!((text[0] >= 'a' && text[0] <= 'z') || (text[0] >= 'A' && text[0] <= 'Z'))) return false;
    for (const char *c = text; *c; c++) {
        const bool word = (*c >= 'a' && *c <= 'z') || (*c >= 'A' && *c <= 'Z') || (*c >= '0' && *c <= '9') ||
                          *c == '-' || *c == '_' || *c == '.' || *c == '/';
        if (!word && !(*c == ' ' && c[1] != '\0' && c[1] != ' ')) return false;
    }
    static const char *const words[] = {"true", "false", "null", "yes", "no", "on", "off",
                                        "True", "False", "Null", "Yes", "No", "On", "Off",
                                        "y",    "n",     "Y",    "N",   NULL};
    for (int i = 0; words[i]; i++)
        if (strcmp(words[i], text) == 0) return false;
    return true;
}

void schema_print_text(struct text_out *out, const char *text)
{
    if (is_plain_safe(text)) {
        text_out_print(out, "%s", text);
        return;
    }
    text_out_print(out, "\"");
    for (const char *c = text; *c; c++) text_out_print(out, *c == '"' || *c == '\\' ? "\\%c" : "%c", *c);
    text_out_print(out, "\"");
}

static void print_number(struct text_out *out, double value)
{
    char text[32];
    text_out_print(out, "%s", number_text(value, text));
}

/* Is there anything to write? */
static bool is_there(const struct field *field, const void *object)
{
    const void *target = at(object, field->offset);
    if (field->there) return field->there(object, field);
    switch (field->type) {
    case FIELD_NUMBER: return !isnan(*(const double *)target);
    case FIELD_RANGE: return !isnan(((const double *)target)[0]);
    case FIELD_TEXT:
    case FIELD_CODE: return *(const char *)target != '\0';
    case FIELD_DATE: return ((const struct date *)target)->year != 0;
    case FIELD_MAP: return field->has == NO_OFFSET || *(const bool *)at(object, field->has);
    case FIELD_LIST:
    case FIELD_ARRAY:
    case FIELD_NUMBERS: return field->required || *(const size_t *)at(object, field->count) > 0;
    case FIELD_CHOICES:
        for (int i = 0; field->choices[i]; i++)
            if (((const bool *)target)[i]) return true;
        return false;
    case FIELD_OWN: return field->has == NO_OFFSET || *(const size_t *)at(object, field->has) > 0;
    default: return true;
    }
}

static void print_map(const struct schema *schema, const void *object, struct text_out *out, int indent,
                      bool flow);

static void print_choices(const struct field *field, const void *object, struct text_out *out)
{
    const void *target = at(object, field->offset);
    bool some = false;
    text_out_print(out, "[");
    for (int i = 0; field->choices[i]; i++) {
        unsigned bits = 0;
        if (field->type == FIELD_BITS) memcpy(&bits, target, sizeof bits);
        const bool on = field->type == FIELD_BITS ? (bits & 1u << i) != 0 : ((const bool *)target)[i];
        if (!on) continue;
        text_out_print(out, "%s%s", some ? ", " : "", field->choices[i]);
        some = true;
    }
    text_out_print(out, "]");
}

static void print_list(const struct field *field, const void *object, struct text_out *out, int indent,
                       bool flow)
{
    const size_t count = *(const size_t *)at(object, field->count);
    const char *element = at(object, field->offset);
    if (field->type != FIELD_ARRAY) memcpy(&element, at(object, field->offset), sizeof element);
    const bool inline_list = flow || count == 0 || field->type == FIELD_NUMBERS;
    if (inline_list) text_out_print(out, "[");
    for (size_t i = 0; i < count; i++) {
        if (inline_list && i) text_out_print(out, ", ");
        if (!inline_list) text_out_print(out, "\n%*s- ", indent, "");
        if (field->type == FIELD_NUMBERS)
            print_number(out, ((const double *)(const void *)element)[i]);
        else
            print_map(field->of, element + i * field->of->size, out, indent + 2,
                      inline_list || field->of->flow);
    }
    if (inline_list) text_out_print(out, "]");
}

static void print_scaled(const struct field *field, const void *target, struct text_out *out)
{
    const double value =
        field->type == FIELD_FIXED ? (double)*(const uint32_t *)target : (double)*(const uint64_t *)target;
    print_number(out, value / field->scale);
}

static void print_value(const struct field *field, const void *object, struct text_out *out, int indent,
                        bool flow)
{
    const void *target = at(object, field->offset);
    const double *ends = target;
    int choice = 0;
    switch (field->type) {
    case FIELD_NUMBER: print_number(out, *ends); break;
    case FIELD_COUNT: text_out_print(out, "%u", *(const unsigned *)target); break;
    case FIELD_FIXED:
    case FIELD_FIXED64: print_scaled(field, target, out); break;
    case FIELD_TEXT:
    case FIELD_CODE: schema_print_text(out, target); break;
    case FIELD_CHOICE:
        memcpy(&choice, target, sizeof choice);
        text_out_print(out, "%s", field->choices[choice]);
        break;
    case FIELD_SWITCH: text_out_print(out, "%s", field->choices[*(const bool *)target ? 1 : 0]); break;
    case FIELD_CHOICES:
    case FIELD_BITS: print_choices(field, object, out); break;
    case FIELD_DATE:
        text_out_print(out, "%04d-%02d-%02d", ((const struct date *)target)->year,
                       ((const struct date *)target)->month, ((const struct date *)target)->day);
        break;
    case FIELD_MAP: print_map(field->of, target, out, indent, flow || field->of->flow); break;
    case FIELD_LIST:
    case FIELD_ARRAY:
    case FIELD_NUMBERS: print_list(field, object, out, indent, flow); break;
    case FIELD_RANGE:
        if (!(ends[0] < ends[1])) {
            print_number(out, ends[0]);
            break;
        }
        text_out_print(out, "{from: ");
        print_number(out, ends[0]);
        text_out_print(out, ", to: ");
        print_number(out, ends[1]);
        text_out_print(out, "}");
        break;
    case FIELD_OWN: field->print(object, field, out, indent); break;
    }
}

/* What a key may hold: its help, its choices or its bounds. */
static void print_meaning(const struct field *field, struct text_out *out)
{
    if (field->help) text_out_print(out, "%s", field->help);
    const char *between = "; ";
    for (int i = 0; field->choices && field->choices[i]; i++) {
        if (!field->choices[i][0]) continue; /* a number without a name */
        text_out_print(out, "%s%s", between, field->choices[i]);
        between = " | ";
    }
    if (field->type != FIELD_NUMBER && field->type != FIELD_COUNT) return;
    text_out_print(out, field->above_least ? " (above %g, to %g)" : " (%g to %g)", field->least, field->most);
}

/* The comment of a key: one line, and one for each key of a map that is written on one line. */
static void print_comment(const struct field *field, struct text_out *out, int indent, bool given)
{
    text_out_print(out, "# %s%s: ", field->key, given ? "" : " (may be added)");
    print_meaning(field, out);
    if (!field->of || !field->of->flow) return;
    for (const struct field *inner = field->of->fields; inner->key; inner++) {
        text_out_print(out, "\n%*s#   %s%s: ", indent, "", inner->key,
                       inner->required ? "" : " (may be left out)");
        print_meaning(inner, out);
    }
}

/* In a block the first key follows what the caller wrote ("- " or a new line); at depth the map starts on a
 * line of its own. */
static void print_map(const struct schema *schema, const void *object, struct text_out *out, int indent,
                      bool flow)
{
    bool some = false;
    const bool commented = out->commented && !flow;
    if (flow) text_out_print(out, "{");
    for (const struct field *field = schema->fields; field->key; field++) {
        const bool given = is_there(field, object);
        if (!given && !commented) continue;
        if (some && flow) text_out_print(out, ", ");
        if (some && !flow) text_out_print(out, "\n%*s", indent, "");
        some = true;
        if (commented) print_comment(field, out, indent, given);
        if (!given) continue;
        if (commented) text_out_print(out, "\n%*s", indent, "");
        const bool block = field->type == FIELD_MAP && !flow && !field->of->flow;
        const bool list = !flow && (field->type == FIELD_LIST || field->type == FIELD_ARRAY) &&
                          *(const size_t *)at(object, field->count) > 0;
        text_out_print(out, "%s:%s", field->key, block || list ? "" : " ");
        if (block) text_out_print(out, "\n%*s", indent + 2, "");
        print_value(field, object, out, indent + 2, flow);
    }
    if (flow) text_out_print(out, "}");
}

void schema_print(const struct schema *schema, const char *format, const void *object, struct text_out *out)
{
    text_out_print(out, "format: %s\n", format);
    print_map(schema, object, out, 0, false);
    text_out_print(out, "\n");
}
