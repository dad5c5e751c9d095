/* Single values: strict decimals, readable lines, codes. The goal of this code: nothing that only looks like
 * a value is taken for one. */
#include "core/document/schema_reading.h"

#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

bool number_read(const char *text, size_t length, double *value)
{
    char copy[64];
    if (length == 0 || length >= sizeof copy) return false;
    memcpy(copy, text, length);
    copy[length] = '\0';
    const char *c = copy;
    if (*c == '+' || *c == '-') c++;
    int digits = 0;
    for (; *c >= '0' && *c <= '9'; c++) digits++;
    if (*c == '.')
        for (c++; *c >= '0' && *c <= '9'; c++) digits++;
    if (digits == 0) return false;
    if (*c == 'e' || *c == 'E') {
        c++;
        if (*c == '+' || *c == '-') c++;
        if (!(*c >= '0' && *c <= '9')) return false;
        while (*c >= '0' && *c <= '9') c++;
    }
    if (*c != '\0') return false;
    const double read = strtod(copy, NULL);
    if (!isfinite(read)) return false;
    *value = read;
    return true;
}

/* What a node holds, in few words for a message. */
const char *schema_holds(struct fy_node *node, char buffer[96])
{
    size_t length = 0;
    const char *text = fy_node_is_scalar(node) ? fy_node_get_scalar(node, &length) : NULL;
    if (fy_node_is_mapping(node))
        (void)snprintf(buffer, 96, "holds a map");
    else if (fy_node_is_sequence(node))
        (void)snprintf(buffer, 96, "holds a list");
    else if (!text || length == 0)
        (void)snprintf(buffer, 96, "holds nothing");
    else
        (void)snprintf(buffer, 96, "holds %.*s%s", (int)(length > 60 ? 60 : length), text,
                       length > 60 ? ".." : "");
    return buffer;
}

const char *schema_number_range(double least, double most, bool above_least, char buffer[96])
{
    char low[32], high[32];
    number_text(least, low);
    number_text(most, high);
    if (isinf(most))
        (void)snprintf(buffer, 96, "%s%s", above_least ? "above " : "from ", low);
    else if (isinf(least))
        (void)snprintf(buffer, 96, "up to %s", high);
    else
        (void)snprintf(buffer, 96, "%s%s to %s", above_least ? "above " : "from ", low, high);
    return buffer;
}

bool schema_plain_scalar(struct fy_node *node, const char **text, size_t *length)
{
    if (!fy_node_is_scalar(node) || fy_node_is_alias(node) || fy_node_get_style(node) != FYNS_PLAIN)
        return false;
    *text = fy_node_get_scalar(node, length);
    return *text != NULL;
}

enum status schema_read_number(struct reading *reading, struct fy_node *node, const char *path, double least,
                               double most, bool above_least, double *value)
{
    char held[96], range[96];
    const char *text = NULL;
    size_t length = 0;
    double read = 0;
    if (!schema_plain_scalar(node, &text, &length) || !number_read(text, length, &read) || read < least ||
        read > most || (above_least && !(read > least)))
        return schema_fault(reading, path, "%s, may hold a number %s", schema_holds(node, held),
                            schema_number_range(least, most, above_least, range));
    *value = read;
    return STATUS_OK;
}

/* Valid UTF-8 without control characters (Unicode 15, table 3-7). */
bool schema_readable(const char *text, size_t length)
{
    for (size_t i = 0; i < length;) {
        const unsigned char c = (unsigned char)text[i];
        const size_t more = c < 0x80                ? 0
                            : c >= 0xC2 && c < 0xE0 ? 1
                            : c >= 0xE0 && c < 0xF0 ? 2
                            : c >= 0xF0 && c < 0xF5 ? 3
                                                    : 9;
        if (c < 0x20 || c == 0x7F || more == 9 || i + more >= length + (more == 0)) return false;
        for (size_t k = 1; k <= more; k++)
            if (((unsigned char)text[i + k] & 0xC0) != 0x80) return false;
        if (c == 0xC2 && (unsigned char)text[i + 1] < 0xA0) return false; /* C1 controls */
        i += more + 1;
    }
    return true;
}

enum status schema_read_text(struct reading *reading, struct fy_node *node, const char *path, char *text,
                             size_t size)
{
    char held[96];
    size_t length = 0;
    const char *scalar =
        fy_node_is_scalar(node) && !fy_node_is_alias(node) ? fy_node_get_scalar(node, &length) : NULL;
    if (!scalar || length == 0 || length >= size || memchr(scalar, '\0', length) ||
        !schema_readable(scalar, length))
        return schema_fault(reading, path, "%s, may hold a line of 1 to %zu characters",
                            schema_holds(node, held), size - 1);
    memcpy(text, scalar, length);
    text[length] = '\0';
    return STATUS_OK;
}

enum status schema_read_code(struct reading *reading, struct fy_node *node, const char *path, char *text,
                             size_t size)
{
    const enum status status = schema_read_text(reading, node, path, text, size);
    if (status != STATUS_OK) return status;
    for (const char *c = text; *c; c++) {
        const bool letter = (*c >= 'a' && *c <= 'z') || (*c >= 'A' && *c <= 'Z') || (*c >= '0' && *c <= '9');
        if (letter || (c > text && (*c == '-' || *c == '_' || *c == '.'))) continue;
        return schema_fault(reading, path,
                            "holds %s, may hold a code of letters, digits and dashes, no name of a person",
                            text);
    }
    return STATUS_OK;
}
