/* Reading by schema. The goal of this code: one table says what a document may hold; a fault is told by
 * place, key, what it holds and what it may hold; nothing is half loaded. YAML 1.2 by libfyaml, used without
 * aliases and tags; numbers are strict decimals. */
#include "core/document/schema_reading.h"

#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

static void *at(void *object, size_t offset)
{
    return (char *)object + offset;
}

static enum status read_choice(struct reading *reading, struct fy_node *node, const char *path,
                               const struct field *field, int *choice)
{
    size_t length = 0;
    const char *text =
        fy_node_is_scalar(node) && !fy_node_is_alias(node) ? fy_node_get_scalar(node, &length) : NULL;
    for (int i = 0; text && field->choices[i]; i++) {
        if (length == 0 || strlen(field->choices[i]) != length ||
            memcmp(field->choices[i], text, length) != 0)
            continue;
        *choice = i;
        return STATUS_OK;
    }
    char held[96], may[256] = "";
    for (int i = 0; field->choices[i]; i++) {
        const size_t used = strlen(may);
        (void)snprintf(may + used, sizeof may - used, "%s%s", used ? " | " : "", field->choices[i]);
    }
    return schema_fault(reading, path, "%s, may hold %s", schema_holds(node, held), may);
}

static enum status read_choices(struct reading *reading, struct fy_node *node, const char *path,
                                const struct field *field, void *object)
{
    char held[96], item_path[PATH_TEXT];
    if (!fy_node_is_sequence(node) || fy_node_sequence_item_count(node) < 1)
        return schema_fault(reading, path, "%s, may hold a list such as [%s]", schema_holds(node, held),
                            field->choices[0][0] ? field->choices[0] : field->choices[1]);
    unsigned bits = 0;
    void *previous = NULL;
    struct fy_node *item;
    for (int i = 0; (item = fy_node_sequence_iterate(node, &previous)) != NULL; i++) {
        int choice = 0;
        (void)snprintf(item_path, sizeof item_path, "%.200s[%d]", path, i);
        schema_note(reading, item_path, item);
        const enum status status = read_choice(reading, item, item_path, field, &choice);
        if (status != STATUS_OK) return status;
        if (bits & 1u << choice)
            return schema_fault(reading, item_path, "holds %s a second time, may hold it once",
                                field->choices[choice]);
        bits |= 1u << choice;
    }
    if (field->type == FIELD_BITS) {
        memcpy(at(object, field->offset), &bits, sizeof bits);
        return STATUS_OK;
    }
    bool *flags = at(object, field->offset);
    for (int i = 0; field->choices[i]; i++) flags[i] = (bits & 1u << i) != 0;
    return STATUS_OK;
}

static enum status read_map(struct reading *reading, struct fy_node *node, const char *path,
                            const struct schema *schema, void *object);

static enum status read_list(struct reading *reading, struct fy_node *node, const char *path,
                             const struct field *field, void *object)
{
    char held[96], item_path[PATH_TEXT];
    const int items = fy_node_is_sequence(node) ? fy_node_sequence_item_count(node) : -1;
    if (items < 0 || items < field->least || items > field->most)
        return schema_fault(reading, path, "%s%s, may hold a list of %g to %g",
                            items < 0 ? schema_holds(node, held) : "holds a list",
                            items < 0    ? ""
                            : items == 0 ? " of none"
                                         : " of another length",
                            field->least, field->most);
    const size_t size = field->type == FIELD_NUMBERS ? sizeof(double) : field->of->size;
    char *element = field->type == FIELD_ARRAY ? at(object, field->offset) : calloc((size_t)items + 1, size);
    if (!element) return status_fail(reading->why, STATUS_INTERNAL, "no memory for %s", path);
    if (field->type != FIELD_ARRAY) memcpy(at(object, field->offset), &element, sizeof element);
    size_t *count = at(object, field->count);
    void *previous = NULL;
    struct fy_node *item;
    for (int i = 0; (item = fy_node_sequence_iterate(node, &previous)) != NULL; i++) {
        (void)snprintf(item_path, sizeof item_path, "%.200s[%d]", path, i);
        schema_note(reading, item_path, item);
        *count = (size_t)i + 1; /* what stands is freed, also on failure */
        const enum status status =
            field->type == FIELD_NUMBERS
                ? schema_read_number(reading, item, item_path, field->of ? 0 : -HUGE_VAL, HUGE_VAL, false,
                                     (double *)(void *)(element + (size_t)i * size))
                : read_map(reading, item, item_path, field->of, element + (size_t)i * size);
        if (status != STATUS_OK) return status;
    }
    return STATUS_OK;
}

static enum status read_fixed(struct reading *reading, struct fy_node *node, const char *path,
                              const struct field *field, void *object)
{
    double number = 0;
    const enum status status =
        schema_read_number(reading, node, path, field->least, field->most, field->above_least, &number);
    if (status != STATUS_OK) return status;
    const double scaled = number * field->scale, whole = round(scaled);
    char held[96];
    if (fabs(scaled - whole) > 1e-6 + 1e-12 * whole)
        return schema_fault(reading, path, "%s, may hold steps of %g", schema_holds(node, held),
                            1 / field->scale);
    if (field->type == FIELD_FIXED)
        *(uint32_t *)at(object, field->offset) = (uint32_t)whole;
    else
        *(uint64_t *)at(object, field->offset) = (uint64_t)whole;
    return STATUS_OK;
}

static enum status read_range(struct reading *reading, struct fy_node *node, const char *path,
                              const struct field *field, double *ends)
{
    if (!fy_node_is_mapping(node)) {
        const enum status status =
            schema_read_number(reading, node, path, field->least, field->most, field->above_least, &ends[0]);
        ends[1] = ends[0];
        return status;
    }
    const struct field of[] = {{.key = "from",
                                .type = FIELD_NUMBER,
                                .offset = 0,
                                .least = field->least,
                                .most = field->most,
                                .above_least = field->above_least,
                                .required = true},
                               {.key = "to",
                                .type = FIELD_NUMBER,
                                .offset = sizeof(double),
                                .least = field->least,
                                .most = field->most,
                                .above_least = field->above_least,
                                .required = true},
                               {0}};
    const struct schema range = {.name = "a range", .size = 2 * sizeof(double), .fields = of};
    const enum status status = read_map(reading, node, path, &range, ends);
    if (status != STATUS_OK) return status;
    if (ends[0] > ends[1])
        return schema_fault(reading, path, "holds from %g to %g, may hold from at most to", ends[0], ends[1]);
    return STATUS_OK;
}

static enum status read_date(struct reading *reading, struct fy_node *node, const char *path,
                             struct date *date)
{
    char held[96], text[16];
    size_t length = 0;
    const char *scalar = fy_node_is_scalar(node) ? fy_node_get_scalar(node, &length) : NULL;
    if (scalar && length == 10) {
        memcpy(text, scalar, length);
        text[length] = '\0';
        if (date_read(text, date)) return STATUS_OK;
    }
    return schema_fault(reading, path, "%s, may hold a day YYYY-MM-DD", schema_holds(node, held));
}

static enum status read_count(struct reading *reading, struct fy_node *node, const char *path,
                              const struct field *field, unsigned *count)
{
    double number = 0;
    char held[96];
    const char *text = NULL;
    size_t length = 0;
    if (!schema_plain_scalar(node, &text, &length) || !number_read(text, length, &number) ||
        number < field->least || number > field->most || fabs(number - round(number)) > 0)
        return schema_fault(reading, path, "%s, may hold a whole number from %.0f to %.0f",
                            schema_holds(node, held), field->least, field->most);
    *count = (unsigned)number;
    return STATUS_OK;
}

static enum status read_field(struct reading *reading, struct fy_node *node, const char *path,
                              const struct field *field, void *object)
{
    void *target = at(object, field->offset);
    int choice = 0;
    enum status status;
    switch (field->type) {
    case FIELD_NUMBER:
        return schema_read_number(reading, node, path, field->least, field->most, field->above_least, target);
    case FIELD_COUNT: return read_count(reading, node, path, field, target);
    case FIELD_FIXED:
    case FIELD_FIXED64: return read_fixed(reading, node, path, field, object);
    case FIELD_TEXT: return schema_read_text(reading, node, path, target, field->size);
    case FIELD_CODE: return schema_read_code(reading, node, path, target, field->size);
    case FIELD_CHOICE:
        status = read_choice(reading, node, path, field, &choice);
        memcpy(target, &choice, sizeof choice);
        return status;
    case FIELD_SWITCH:
        status = read_choice(reading, node, path, field, &choice);
        *(bool *)target = choice == 1;
        return status;
    case FIELD_CHOICES:
    case FIELD_BITS: return read_choices(reading, node, path, field, object);
    case FIELD_DATE: return read_date(reading, node, path, target);
    case FIELD_MAP:
        if (field->has != NO_OFFSET) *(bool *)at(object, field->has) = true;
        return read_map(reading, node, path, field->of, target);
    case FIELD_LIST:
    case FIELD_ARRAY:
    case FIELD_NUMBERS: return read_list(reading, node, path, field, object);
    case FIELD_RANGE: return read_range(reading, node, path, field, target);
    case FIELD_OWN: return field->read(reading, node, path, object, field);
    }
    return STATUS_INTERNAL;
}

static void set_absent(const struct schema *schema, void *object)
{
    for (const struct field *field = schema->fields; field->key; field++) {
        void *target = at(object, field->offset);
        if (field->type == FIELD_NUMBER) {
            *(double *)target = field->fallback;
        } else if (field->type == FIELD_RANGE) {
            ((double *)target)[0] = ((double *)target)[1] = (double)NAN;
        } else if (field->type == FIELD_COUNT) {
            *(unsigned *)target = (unsigned)field->fallback;
        } else if (field->type == FIELD_CHOICE) {
            const int choice = (int)field->fallback;
            memcpy(target, &choice, sizeof choice);
        } else if (field->type == FIELD_BITS) {
            *(unsigned *)target = (unsigned)field->fallback;
        } else if (field->type == FIELD_CHOICES) {
            for (int i = 0; field->choices[i]; i++)
                ((bool *)target)[i] = ((unsigned)field->fallback & 1u << i) != 0;
        } else if (field->type == FIELD_MAP) {
            set_absent(field->of, target);
        }
    }
    if (schema->begin) schema->begin(object);
}

static const struct field *field_of(const struct schema *schema, const char *key, size_t length)
{
    for (const struct field *field = schema->fields; field->key; field++)
        if (strlen(field->key) == length && memcmp(field->key, key, length) == 0) return field;
    return NULL;
}

static enum status unknown_key(struct reading *reading, const struct schema *schema, const char *path)
{
    char keys[420] = "";
    for (const struct field *field = schema->fields; field->key; field++) {
        const size_t used = strlen(keys);
        (void)snprintf(keys + used, sizeof keys - used, "%s%s", used ? ", " : "", field->key);
    }
    return schema_fault(reading, path, "is unknown here, %s may hold %s", schema->name, keys);
}

#define FORMAT_SEEN ((uint64_t)1 << 63) /* no kind has as many keys */

static enum status read_pair(struct reading *reading, struct fy_node_pair *pair, const char *path,
                             const struct schema *schema, void *object, uint64_t *seen)
{
    struct fy_node *key = fy_node_pair_key(pair), *value = fy_node_pair_value(pair);
    char key_path[PATH_TEXT], text[64];
    size_t length = 0;
    const char *name = key && fy_node_is_scalar(key) ? fy_node_get_scalar(key, &length) : NULL;
    if (!name || length == 0 || length >= sizeof text || !schema_readable(name, length)) {
        schema_note(reading, path, key);
        return schema_fault(reading, path, "holds a key that is no word, may hold the keys of %s",
                            schema->name);
    }
    memcpy(text, name, length);
    text[length] = '\0';
    (void)snprintf(key_path, sizeof key_path, "%.180s%s%s", path, path[0] ? "." : "", text);
    if (path[0] == '\0' && strcmp(text, "format") == 0 &&
        !(*seen & FORMAT_SEEN)) { /* read_root has read it */
        *seen |= FORMAT_SEEN;
        return STATUS_OK;
    }
    const struct field *field = field_of(schema, name, length);
    const struct place *before = schema_place_of(reading, key_path);
    const int first_line = before ? before->line : 0;
    if (!field && path[0] == '\0' && strcmp(text, "format") == 0) {
        schema_note(reading, key_path, key);
        return schema_fault(reading, key_path, "stands a second time (first in line %d), may stand once",
                            first_line);
    }
    if (!field || *seen & (uint64_t)1 << (field - schema->fields)) {
        schema_note(reading, key_path, key);
        if (!field) return unknown_key(reading, schema, key_path);
        return schema_fault(reading, key_path, "stands a second time (first in line %d), may stand once",
                            first_line);
    }
    *seen |= (uint64_t)1 << (field - schema->fields);
    schema_note(reading, key_path, value && schema_first_token(value) ? value : key);
    if (!value)
        return schema_fault(reading, key_path, "holds nothing, may hold %s",
                            field->help ? field->help : "a value");
    if (fy_node_is_alias(value) || fy_node_get_tag(value, &length))
        return schema_fault(reading, key_path, "holds an alias or a tag, may hold a plain value");
    return read_field(reading, value, key_path, field, object);
}

static enum status read_map(struct reading *reading, struct fy_node *node, const char *path,
                            const struct schema *schema, void *object)
{
    char held[96], key_path[PATH_TEXT];
    set_absent(schema, object);
    if (!fy_node_is_mapping(node) || fy_node_is_alias(node))
        return schema_fault(reading, path, "%s, may hold the keys of %s", schema_holds(node, held),
                            schema->name);
    if (++reading->depth > DEPTH_MAX) return schema_fault(reading, path, "is nested too deep");
    uint64_t seen = 0;
    void *previous = NULL;
    struct fy_node_pair *pair;
    while ((pair = fy_node_mapping_iterate(node, &previous)) != NULL) {
        const enum status status = read_pair(reading, pair, path, schema, object, &seen);
        if (status != STATUS_OK) return status;
    }
    for (const struct field *field = schema->fields; field->key; field++) {
        if (!field->required || seen & (uint64_t)1 << (field - schema->fields)) continue;
        return schema_fault(reading, schema_path(path, field->key, key_path), "is absent, %s needs it: %s",
                            schema->name, field->help ? field->help : "a value");
    }
    reading->depth--;
    return schema->check ? schema->check(reading, path, object) : STATUS_OK;
}

/* The first fault of YAML itself, in this program's form. */
static enum status yaml_fault(struct reading *reading, struct fy_diag *diag)
{
    void *previous = NULL;
    const struct fy_diag_error *error = fy_diag_errors_iterate(diag, &previous);
    if (!error)
        return status_fail(reading->why, STATUS_DOCUMENT,
                           "%s:1:1: document: is empty or no YAML, may hold a map of keys",
                           reading->bytes->path);
    return status_fail(reading->why, STATUS_DOCUMENT, "%s:%d:%d: document: is no valid YAML (%s)",
                       reading->bytes->path, error->line > 0 ? error->line : 1,
                       error->column > 0 ? error->column : 1, error->msg ? error->msg : "unknown");
}

static enum status second_document(struct reading *reading, struct fy_document *second)
{
    if (fy_document_root(second)) schema_note(reading, "", fy_document_root(second));
    return schema_fault(reading, "", "a second document begins, a file may hold one");
}

struct envelope {
    const struct schema *schema;
    const char *format;
};

/* The format line comes first; then the kind's own keys. */
static enum status read_root(struct reading *reading, struct fy_node *root, const struct envelope *envelope,
                             void *object)
{
    if (!root || !fy_node_is_mapping(root))
        return status_fail(reading->why, STATUS_DOCUMENT,
                           "%s:1:1: document: is no map, may hold keys, the first format: %s",
                           reading->bytes->path, envelope->format);
    void *previous = NULL;
    struct fy_node_pair *first = fy_node_mapping_iterate(root, &previous);
    size_t length = 0;
    const char *key = first ? fy_node_get_scalar(fy_node_pair_key(first), &length) : NULL;
    schema_note(reading, "", root);
    if (!key || length != 6 || memcmp(key, "format", 6) != 0)
        return schema_fault(reading, "format", "is not the first key, may hold %s there", envelope->format);
    struct fy_node *value = fy_node_pair_value(first);
    char held[96];
    if (value) schema_note(reading, "format", value);
    const char *text = value && fy_node_is_scalar(value) ? fy_node_get_scalar(value, &length) : NULL;
    if (!text || strlen(envelope->format) != length || memcmp(text, envelope->format, length) != 0)
        return schema_fault(reading, "format", "%s, may hold %s",
                            value ? schema_holds(value, held) : "holds nothing", envelope->format);
    return read_map(reading, root, "", envelope->schema, object);
}

/* Frees what fields own, then what the kind allocated itself. */
void schema_free(const struct schema *schema, void *object)
{
    for (const struct field *field = schema->fields; field->key; field++) {
        void *target = at(object, field->offset);
        if (field->type == FIELD_MAP) schema_free(field->of, target);
        if (field->type != FIELD_LIST && field->type != FIELD_ARRAY && field->type != FIELD_NUMBERS) continue;
        char *element = target;
        if (field->type != FIELD_ARRAY) memcpy(&element, target, sizeof element);
        size_t *count = at(object, field->count);
        for (size_t i = 0; element && field->of && field->type != FIELD_NUMBERS && i < *count; i++)
            schema_free(field->of, element + i * field->of->size);
        *count = 0;
        if (field->type == FIELD_ARRAY) continue;
        free(element);
        memset(target, 0, sizeof element);
    }
    if (schema->free) schema->free(object);
}

const void *schema_context(const struct reading *reading)
{
    return reading->context;
}

enum status schema_parse(const struct schema *schema, const char *format, const struct document_bytes *bytes,
                         void *object, struct message *why)
{
    return schema_parse_with(schema, format, bytes, object, NULL, why);
}

enum status schema_parse_with(const struct schema *schema, const char *format,
                              const struct document_bytes *bytes, void *object, const void *context,
                              struct message *why)
{
    memset(object, 0, schema->size);
    struct reading reading = {.bytes = bytes, .why = why, .context = context};
    struct fy_diag_cfg diag_configuration;
    fy_diag_cfg_default(&diag_configuration);
    struct fy_diag *diag = fy_diag_create(&diag_configuration);
    if (!diag) return status_fail(why, STATUS_INTERNAL, "%s: no memory", bytes->path);
    fy_diag_set_collect_errors(diag, true);
    const struct fy_parse_cfg configuration = {.flags = FYPCF_QUIET | FYPCF_ALLOW_DUPLICATE_KEYS,
                                               .diag = diag};
    struct fy_parser *parser = fy_parser_create(&configuration);
    struct fy_document *document = NULL, *second = NULL;
    enum status status;
    if (bytes->size == 0 || memchr(bytes->data, '\0', bytes->size))
        status = status_fail(why, STATUS_DOCUMENT, "%s:1:1: document: %s, may hold format: %s and its keys",
                             bytes->path, bytes->size ? "holds a zero octet" : "is empty", format);
    else if (!parser || fy_parser_set_string(parser, bytes->data, bytes->size) != 0)
        status = status_fail(why, STATUS_INTERNAL, "%s: no memory", bytes->path);
    else if (!(document = fy_parse_load_document(parser)))
        status = yaml_fault(&reading, diag);
    else if ((second = fy_parse_load_document(parser)) != NULL)
        status = second_document(&reading, second);
    else if (fy_diag_got_error(diag))
        status = yaml_fault(&reading, diag);
    else
        status = read_root(&reading, fy_document_root(document), &(struct envelope){schema, format}, object);
    if (status != STATUS_OK) {
        schema_free(schema, object);
        memset(object, 0, schema->size);
    }
    fy_parse_document_destroy(parser, second);
    fy_parse_document_destroy(parser, document);
    fy_parser_destroy(parser);
    fy_diag_destroy(diag);
    for (size_t i = 0; i < reading.places; i++) free(reading.place[i].path);
    free(reading.place);
    return status;
}
