/* JSON for machines (RFC 8259): a writer that keeps track of commas and nesting. Numbers are the shortest
 * that read back the same; NAN and infinity are null. */
#ifndef PULSEWRIGHT_CORE_REPORT_JSON_H
#define PULSEWRIGHT_CORE_REPORT_JSON_H
#include <stdbool.h>
#include <stdio.h>

enum { JSON_DEPTH_MAX = 16 };
struct json {
    FILE *out;
    int depth;
    bool some[JSON_DEPTH_MAX + 1]; /* something stands before in this object or array */
};

void json_begin(struct json *json, FILE *out); /* opens the outermost object */
void json_end(struct json *json);              /* closes it, with a newline */
/* key is NULL inside an array. */
void json_object(struct json *json, const char *key);
void json_object_end(struct json *json);
void json_array(struct json *json, const char *key);
void json_array_end(struct json *json);
void json_number(struct json *json, const char *key, double value);
void json_text(struct json *json, const char *key, const char *value); /* NULL: null */
void json_bool(struct json *json, const char *key, bool value);

#endif
