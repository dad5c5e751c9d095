/* Where a document says what. The goal of this code: every fault is told by line, column and key. */
#include "core/document/schema_reading.h"

#include <stdio.h>
#include <stdlib.h>
#include <string.h>

struct fy_token *schema_first_token(struct fy_node *node)
{
    for (int guard = 0; node && guard < 64; guard++) {
        if (fy_node_is_scalar(node)) return fy_node_get_scalar_token(node);
        void *previous = NULL;
        if (fy_node_is_mapping(node)) {
            struct fy_node_pair *pair = fy_node_mapping_iterate(node, &previous);
            node = pair ? fy_node_pair_key(pair) : NULL;
        } else {
            node = fy_node_sequence_iterate(node, &previous);
        }
    }
    return NULL;
}

void schema_note(struct reading *reading, const char *path, struct fy_node *node)
{
    if (reading->places >= PLACES_MAX) return;
    if (reading->places == reading->capacity) {
        const size_t capacity = reading->capacity ? 2 * reading->capacity : 128;
        struct place *grown = realloc(reading->place, capacity * sizeof *grown);
        if (!grown) return;
        reading->place = grown;
        reading->capacity = capacity;
    }
    struct place place = {.path = strdup(path), .line = 1, .column = 1};
    struct fy_token *token = schema_first_token(node);
    const struct fy_mark *mark = token ? fy_token_start_mark(token) : NULL;
    if (mark) {
        place.line = mark->line + 1;
        place.column = mark->column + 1;
        const char *data = reading->bytes->data; /* a quoted text's mark stands behind its quote */
        if (mark->input_pos > 0 && mark->input_pos <= reading->bytes->size && mark->column > 0 &&
            (data[mark->input_pos - 1] == '"' || data[mark->input_pos - 1] == '\''))
            place.column--;
    }
    if (place.path) reading->place[reading->places++] = place;
}

/* The newest place noted under this path. */
const struct place *schema_place_of(const struct reading *reading, const char *path)
{
    for (size_t i = reading->places; i-- > 0;)
        if (strcmp(reading->place[i].path, path) == 0) return &reading->place[i];
    return NULL;
}

bool schema_given(const struct reading *reading, const char *path)
{
    return schema_place_of(reading, path) != NULL;
}

const char *schema_path(const char *path, const char *key, char buffer[256])
{
    char joined[PATH_TEXT];
    (void)snprintf(joined, sizeof joined, "%s%s%s", path, path[0] ? "." : "", key);
    memcpy(buffer, joined, sizeof joined);
    return buffer;
}

enum status schema_fault(struct reading *reading, const char *path, const char *format, ...)
{
    /* the key's own place, else that of the nearest map around it */
    char around[PATH_TEXT];
    (void)snprintf(around, sizeof around, "%s", path);
    const struct place *place = schema_place_of(reading, around);
    while (!place && around[0]) {
        char *dot = strrchr(around, '.');
        char *bracket = strrchr(around, '[');
        char *end = dot > bracket ? dot : bracket;
        if (end)
            *end = '\0';
        else
            around[0] = '\0';
        place = schema_place_of(reading, around);
    }
    char text[MESSAGE_SIZE / 2];
    va_list list;
    va_start(list, format);
    (void)vsnprintf(text, sizeof text, format, list);
    va_end(list);
    for (char *c = text; *c; c++)
        if (*c == '\n' || *c == '\r') *c = ' ';
    return status_fail(reading->why, STATUS_DOCUMENT, "%s:%d:%d: %s: %s", reading->bytes->path,
                       place ? place->line : 1, place ? place->column : 1, path[0] ? path : "document", text);
}
