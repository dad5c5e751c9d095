/* Short forms for the rows of schema tables. Private to core/document. S: the struct, M: its member. */
#ifndef PULSEWRIGHT_CORE_DOCUMENT_FIELDS_H
#define PULSEWRIGHT_CORE_DOCUMENT_FIELDS_H
#include "core/document/schema.h"
#include <math.h>

#define AT(S, M) .offset = offsetof(S, M), .has = NO_OFFSET
#define SIZE_OF(S, M) .size = sizeof(((S *)0)->M)
#define ABSENT ((double)NAN)
/* a number that may be left out (NAN then), one that has a default, one that must be there */
#define NUMBER(S, M, KEY, LEAST, MOST, HELP)                                                                 \
    {                                                                                                        \
        .key = KEY, .type = FIELD_NUMBER, AT(S, M), .least = LEAST, .most = MOST, .fallback = ABSENT,        \
        .help = HELP                                                                                         \
    }
#define NUMBER_ABOVE(S, M, KEY, LEAST, MOST, HELP)                                                           \
    {                                                                                                        \
        .key = KEY, .type = FIELD_NUMBER, AT(S, M), .least = LEAST, .most = MOST, .above_least = true,       \
        .fallback = ABSENT, .help = HELP                                                                     \
    }
#define NUMBER_OR(S, M, KEY, LEAST, MOST, DEFAULT, HELP)                                                     \
    {                                                                                                        \
        .key = KEY, .type = FIELD_NUMBER, AT(S, M), .least = LEAST, .most = MOST, .fallback = DEFAULT,       \
        .help = HELP                                                                                         \
    }
#define NUMBER_NEEDED(S, M, KEY, LEAST, MOST, HELP)                                                          \
    {                                                                                                        \
        .key = KEY, .type = FIELD_NUMBER, AT(S, M), .least = LEAST, .most = MOST, .fallback = ABSENT,        \
        .required = true, .help = HELP                                                                       \
    }
#define NUMBER_NEEDED_ABOVE(S, M, KEY, LEAST, MOST, HELP)                                                    \
    {                                                                                                        \
        .key = KEY, .type = FIELD_NUMBER, AT(S, M), .least = LEAST, .most = MOST, .above_least = true,       \
        .fallback = ABSENT, .required = true, .help = HELP                                                   \
    }
#define COUNT_OR(S, M, KEY, LEAST, MOST, DEFAULT, HELP)                                                      \
    {                                                                                                        \
        .key = KEY, .type = FIELD_COUNT, AT(S, M), .least = LEAST, .most = MOST, .fallback = DEFAULT,        \
        .help = HELP                                                                                         \
    }
#define COUNT_NEEDED(S, M, KEY, LEAST, MOST, HELP)                                                           \
    {                                                                                                        \
        .key = KEY, .type = FIELD_COUNT, AT(S, M), .least = LEAST, .most = MOST, .required = true,           \
        .help = HELP                                                                                         \
    }
#define TEXT(S, M, KEY, HELP)                                                                                \
    {                                                                                                        \
        .key = KEY, .type = FIELD_TEXT, AT(S, M), SIZE_OF(S, M), .help = HELP                                \
    }
#define TEXT_NEEDED(S, M, KEY, HELP)                                                                         \
    {                                                                                                        \
        .key = KEY, .type = FIELD_TEXT, AT(S, M), SIZE_OF(S, M), .required = true, .help = HELP              \
    }
#define CODE(S, M, KEY, HELP)                                                                                \
    {                                                                                                        \
        .key = KEY, .type = FIELD_CODE, AT(S, M), SIZE_OF(S, M), .help = HELP                                \
    }
#define CODE_NEEDED(S, M, KEY, HELP)                                                                         \
    {                                                                                                        \
        .key = KEY, .type = FIELD_CODE, AT(S, M), SIZE_OF(S, M), .required = true, .help = HELP              \
    }
#define CHOICE_OR(S, M, KEY, CHOICES, DEFAULT, HELP)                                                         \
    {                                                                                                        \
        .key = KEY, .type = FIELD_CHOICE, AT(S, M), .choices = CHOICES, .fallback = DEFAULT, .help = HELP    \
    }
#define CHOICE_NEEDED(S, M, KEY, CHOICES, HELP)                                                              \
    {                                                                                                        \
        .key = KEY, .type = FIELD_CHOICE, AT(S, M), .choices = CHOICES, .required = true, .help = HELP       \
    }
#define SWITCH(S, M, KEY, CHOICES, HELP)                                                                     \
    {                                                                                                        \
        .key = KEY, .type = FIELD_SWITCH, AT(S, M), .choices = CHOICES, .help = HELP                         \
    }
#define SWITCH_NEEDED(S, M, KEY, CHOICES, HELP)                                                              \
    {                                                                                                        \
        .key = KEY, .type = FIELD_SWITCH, AT(S, M), .choices = CHOICES, .required = true, .help = HELP       \
    }
#define CHOICES_OR(S, M, KEY, CHOICES, BITS, HELP)                                                           \
    {                                                                                                        \
        .key = KEY, .type = FIELD_CHOICES, AT(S, M), .choices = CHOICES, .fallback = BITS, .help = HELP      \
    }
#define DAY(S, M, KEY, HELP)                                                                                 \
    {                                                                                                        \
        .key = KEY, .type = FIELD_DATE, AT(S, M), .help = HELP                                               \
    }
#define MAP_NEEDED(S, M, KEY, OF, HELP)                                                                      \
    {                                                                                                        \
        .key = KEY, .type = FIELD_MAP, AT(S, M), .of = OF, .required = true, .help = HELP                    \
    }
#define MAP_IF(S, M, KEY, OF, HAS, HELP)                                                                     \
    {                                                                                                        \
        .key = KEY, .type = FIELD_MAP, .offset = offsetof(S, M), .of = OF, .has = offsetof(S, HAS),          \
        .help = HELP                                                                                         \
    }
/* a map of keys that live in the same struct as their parent */
#define MAP_SAME_IF(S, KEY, OF, HAS, NEEDED, HELP)                                                           \
    {                                                                                                        \
        .key = KEY, .type = FIELD_MAP, .offset = 0, .of = OF, .has = offsetof(S, HAS), .required = NEEDED,   \
        .help = HELP                                                                                         \
    }
#define LIST_NEEDED(S, M, COUNT_M, KEY, OF, LEAST, MOST, HELP)                                               \
    {                                                                                                        \
        .key = KEY, .type = FIELD_LIST, AT(S, M), .count = offsetof(S, COUNT_M), .of = OF, .least = LEAST,   \
        .most = MOST, .required = true, .help = HELP                                                         \
    }
#define ARRAY_NEEDED(S, M, COUNT_M, KEY, OF, LEAST, MOST, HELP)                                              \
    {                                                                                                        \
        .key = KEY, .type = FIELD_ARRAY, AT(S, M), .count = offsetof(S, COUNT_M), .of = OF, .least = LEAST,  \
        .most = MOST, .required = true, .help = HELP                                                         \
    }
#define RANGE(S, M, KEY, LEAST, MOST, HELP)                                                                  \
    {                                                                                                        \
        .key = KEY, .type = FIELD_RANGE, AT(S, M), .least = LEAST, .most = MOST, .help = HELP                \
    }
#define LAST                                                                                                 \
    {                                                                                                        \
        .key = NULL                                                                                          \
    }

#endif
