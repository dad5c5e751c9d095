/* Schema: one table a kind of document drives reading, checking, writing and the templates of `begin`.
 * Private to core/document. */
#ifndef PULSEWRIGHT_CORE_DOCUMENT_SCHEMA_H
#define PULSEWRIGHT_CORE_DOCUMENT_SCHEMA_H
#include "core/document/document.h"
#include <stddef.h>
#include <stdint.h>

enum field_type {
    FIELD_NUMBER,  /* double; absent: `fallback`, which is NAN where there is none */
    FIELD_COUNT,   /* unsigned */
    FIELD_FIXED,   /* uint32_t that is the number times `scale`, exactly */
    FIELD_FIXED64, /* uint64_t likewise */
    FIELD_TEXT,    /* char[size] */
    FIELD_CODE,    /* char[size]: letters, digits, dashes: a person, a signer, a name */
    FIELD_CHOICE,  /* an int-sized enum, by `choices`; absent: (int)fallback */
    FIELD_SWITCH,  /* bool: choices[0] false, choices[1] true */
    FIELD_CHOICES, /* list of choices -> bool[], index of the choice; absent: fallback is the bit set */
    FIELD_BITS,    /* list of choices -> unsigned of bits */
    FIELD_DATE,    /* struct date */
    FIELD_MAP,     /* a struct at the offset by `of`; has: offset of a bool, or NO_OFFSET */
    FIELD_LIST,    /* list of maps: pointer to elements (malloc'ed) at the offset, size_t count at `count` */
    FIELD_ARRAY,   /* list of maps into an array in place, size_t count at `count` */
    FIELD_NUMBERS, /* list of doubles: pointer (malloc'ed) at the offset, size_t count at `count` */
    FIELD_RANGE,   /* two doubles: a number (both), or {from, to} */
    FIELD_OWN      /* read and print by functions of the kind's own */
};

#define NO_OFFSET ((size_t)-1)

struct reading;
struct schema;
struct fy_node;

struct field {
    const char *key;
    enum field_type type;
    size_t offset, size;
    double least, most; /* of a number, a count, a list's length */
    bool above_least;   /* least itself is not allowed */
    bool required;
    double fallback;
    double scale;
    const char *const *choices; /* ended by NULL */
    const struct schema *of;
    size_t has, count;
    const char *help; /* one line with the unit, for templates and pages */
    enum status (*read)(struct reading *reading, struct fy_node *node, const char *path, void *object,
                        const struct field *field);
    void (*print)(const void *object, const struct field *field, struct text_out *out, int indent);
    bool (*there)(const void *object,
                  const struct field *field); /* is it to be written? NULL: by the type's own rule */
};

struct schema {
    const char *name;           /* of the map, in messages: "a muscle" */
    size_t size;                /* of the struct */
    bool flow;                  /* written on one line */
    const struct field *fields; /* ended by a NULL key */
    /* Absent values and defaults that a table can not say; NULL: none. Called before reading. */
    void (*begin)(void *object);
    /* Checks across keys, after reading; NULL: none. */
    enum status (*check)(struct reading *reading, const char *path, void *object);
    void (*free)(void *object); /* what FIELD_OWN allocated; NULL: none */
};

/* Reads a whole document of this format into object (schema->size). On failure the object is zeroed and owns
 * nothing. */
enum status schema_parse(const struct schema *schema, const char *format, const struct document_bytes *bytes,
                         void *object, struct message *why);
/* The same, with something that checks may ask for by schema_context (NULL by schema_parse). */
enum status schema_parse_with(const struct schema *schema, const char *format,
                              const struct document_bytes *bytes, void *object, const void *context,
                              struct message *why);
const void *schema_context(const struct reading *reading);
void schema_print(const struct schema *schema, const char *format, const void *object, struct text_out *out);
void schema_free(const struct schema *schema, void *object);

/* For checks: one line `file:line:column: key: holds, may hold`; the place is that of the key's value, or of
 * the map where the key is absent. */
__attribute__((format(printf, 3, 4))) enum status schema_fault(struct reading *reading, const char *path,
                                                               const char *format, ...);
/* Joins "a" and "b" to "a.b" in buffer ("b" where a is empty). */
const char *schema_path(const char *path, const char *key, char buffer[256]);
/* The place of a node, noted under its path, for FIELD_OWN readers. */
void schema_note(struct reading *reading, const char *path, struct fy_node *node);
bool schema_given(const struct reading *reading, const char *path); /* was this key in the document? */
enum status schema_read_number(struct reading *reading, struct fy_node *node, const char *path, double least,
                               double most, bool above_least, double *value);
enum status schema_read_text(struct reading *reading, struct fy_node *node, const char *path, char *text,
                             size_t size);
/* A strict decimal number (YAML 1.2 core schema's decimal forms): sign, digits, point, exponent; finite. */
bool number_read(const char *text, size_t length, double *value);
/* Text as a YAML scalar, quoted where it has to be. */
void schema_print_text(struct text_out *out, const char *text);

#endif
