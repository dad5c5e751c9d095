/* JSON writer. The goal of this code: what is printed is always valid JSON, whatever the values. */
#include "core/report/json.h"

#include "core/document/document.h"

#include <assert.h>
#include <math.h>

static void put_string(FILE *out, const char *text)
{
    fputc('"', out);
    for (const unsigned char *c = (const unsigned char *)text; *c; c++) {
        if (*c == '"' || *c == '\\')
            fprintf(out, "\\%c", *c);
        else if (*c < 0x20)
            fprintf(out, "\\u%04x", *c);
        else
            fputc(*c, out);
    }
    fputc('"', out);
}

static void before(struct json *json, const char *key)
{
    if (json->some[json->depth]) fputc(',', json->out);
    if (json->depth) fprintf(json->out, "\n%*s", 2 * json->depth, "");
    json->some[json->depth] = true;
    if (key) {
        put_string(json->out, key);
        fputs(": ", json->out);
    }
}

static void open_level(struct json *json, const char *key, char bracket)
{
    before(json, key);
    fputc(bracket, json->out);
    assert(json->depth < JSON_DEPTH_MAX);
    json->some[++json->depth] = false;
}

static void close_level(struct json *json, char bracket)
{
    assert(json->depth > 0);
    const bool some = json->some[json->depth--];
    if (some) fprintf(json->out, "\n%*s", 2 * json->depth, "");
    fputc(bracket, json->out);
}

void json_begin(struct json *json, FILE *out)
{
    *json = (struct json){.out = out};
    open_level(json, NULL, '{');
}

void json_end(struct json *json)
{
    close_level(json, '}');
    assert(json->depth == 0);
    fputc('\n', json->out);
}

void json_object(struct json *json, const char *key)
{
    open_level(json, key, '{');
}
void json_object_end(struct json *json)
{
    close_level(json, '}');
}
void json_array(struct json *json, const char *key)
{
    open_level(json, key, '[');
}
void json_array_end(struct json *json)
{
    close_level(json, ']');
}

void json_number(struct json *json, const char *key, double value)
{
    before(json, key);
    if (!isfinite(value)) {
        fputs("null", json->out);
        return;
    }
    char text[32];
    (void)number_text(value, text);
    fputs(text, json->out);
}

void json_text(struct json *json, const char *key, const char *value)
{
    before(json, key);
    if (value)
        put_string(json->out, value);
    else
        fputs("null", json->out);
}

void json_bool(struct json *json, const char *key, bool value)
{
    before(json, key);
    fputs(value ? "true" : "false", json->out);
}
