/* A reading under way: the document's places and the words of its faults. Private to the schema's own files.
 */
#ifndef PULSEWRIGHT_CORE_DOCUMENT_SCHEMA_READING_H
#define PULSEWRIGHT_CORE_DOCUMENT_SCHEMA_READING_H
#include "core/document/schema.h"
#include <libfyaml.h>

enum { PATH_TEXT = 256, PLACES_MAX = 400000, DEPTH_MAX = 12 };

struct place {
    char *path;
    int line, column;
};

struct reading {
    const struct document_bytes *bytes;
    struct message *why;
    const void *context;
    struct place *place;
    size_t places, capacity;
    int depth;
};

struct fy_token *schema_first_token(struct fy_node *node);
/* The newest place noted under this path; NULL: none. */
const struct place *schema_place_of(const struct reading *reading, const char *path);
/* What a node holds, in few words for a message. Returns buffer. */
const char *schema_holds(struct fy_node *node, char buffer[96]);
const char *schema_number_range(double least, double most, bool above_least, char buffer[96]);
bool schema_plain_scalar(struct fy_node *node, const char **text, size_t *length);
bool schema_readable(const char *text, size_t length);
enum status schema_read_code(struct reading *reading, struct fy_node *node, const char *path, char *text,
                             size_t size);

#endif
