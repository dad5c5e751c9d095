/* Tables: CSV by RFC 4180 with a header row. The goal of this code: columns are found by name in any order,
 * further ones are ignored, a bad cell is told by file:line:column, and what is written reads back to the
 * last bit. */
#include "core/document/table.h"

#include "core/document/schema.h"
#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

enum { COLUMNS_MAX = 256, ROWS_MAX = 20000000 };

/* Reads one record at *c into cells (pointers into data, unquoted in place); false: a quote is not closed. */
static bool read_record(char **c, char *end, char **cell, size_t *cells, size_t cells_max, size_t *line)
{
    char *in = *c;
    *cells = 0;
    for (;;) {
        char *out = in, *start = in;
        if (in < end && *in == '"') {
            for (in++;; in++) {
                if (in >= end) return false;
                if (*in == '"' && in + 1 < end && in[1] == '"')
                    in++;
                else if (*in == '"')
                    break;
                if (*in == '\n') (*line)++;
                *out++ = *in;
            }
            in++;
        } else {
            while (in < end && *in != ',' && *in != '\n' && *in != '\r') in++;
            out = in;
        }
        const char stop = in < end ? *in : '\n';
        if (*cells < cells_max) cell[(*cells)++] = start;
        if (stop == '\r' && in + 1 < end && in[1] == '\n') in++;
        if (in < end) in++;
        *out = '\0';
        if (stop == ',') continue;
        *c = in;
        if (stop != '\n' && stop != '\r') return false; /* text after a closing quote */
        (*line)++;
        return true;
    }
}

struct making {
    const struct document_bytes *bytes;
    struct table table;
    char *text;
    size_t capacity;
};

static enum status grow(struct making *making, struct message *why)
{
    struct table *table = &making->table;
    if (table->rows < making->capacity) return STATUS_OK;
    if (table->rows >= ROWS_MAX)
        return status_fail(why, STATUS_DOCUMENT, "%s: holds more than %d rows", making->bytes->path,
                           ROWS_MAX);
    const size_t capacity = making->capacity ? 2 * making->capacity : 256;
    char **cells = realloc(table->cell, capacity * table->columns * sizeof *cells);
    if (cells) table->cell = cells;
    size_t *lines = cells ? realloc(table->line, capacity * sizeof *lines) : NULL;
    if (lines) table->line = lines;
    if (!cells || !lines) return status_fail(why, STATUS_INTERNAL, "%s: no memory", making->bytes->path);
    making->capacity = capacity;
    return STATUS_OK;
}

static enum status make_table(struct making *making, struct message *why)
{
    struct table *table = &making->table;
    char *header[COLUMNS_MAX], *cell[COLUMNS_MAX], *c = making->text, *end = c + making->bytes->size;
    size_t line = 1, cells = 0;
    if (end - c >= 3 && memcmp(c, "\xEF\xBB\xBF", 3) == 0) c += 3;
    if (c == end)
        return status_fail(why, STATUS_DOCUMENT,
                           "%s:1:1: header: is absent, the first row may hold the columns' names",
                           making->bytes->path);
    if (!read_record(&c, end, header, &table->columns, COLUMNS_MAX, &line))
        return status_fail(why, STATUS_DOCUMENT, "%s:1:1: header: a quote is not closed",
                           making->bytes->path);
    table->name = calloc(table->columns, sizeof *table->name);
    if (!table->name) return status_fail(why, STATUS_INTERNAL, "%s: no memory", making->bytes->path);
    memcpy(table->name, header, table->columns * sizeof *header);
    while (c < end) {
        const size_t row_line = line;
        if (!read_record(&c, end, cell, &cells, COLUMNS_MAX, &line))
            return status_fail(why, STATUS_DOCUMENT,
                               "%s:%zu:1: row: a quote is not closed, or text follows one",
                               making->bytes->path, row_line);
        if (cells == 1 && cell[0][0] == '\0') continue; /* an empty line */
        if (cells != table->columns)
            return status_fail(why, STATUS_DOCUMENT,
                               "%s:%zu:1: row: holds %zu cells, may hold %zu as the header does",
                               making->bytes->path, row_line, cells, table->columns);
        const enum status status = grow(making, why);
        if (status != STATUS_OK) return status;
        memcpy(table->cell + table->rows * table->columns, cell, cells * sizeof *cell);
        table->line[table->rows++] = row_line;
    }
    return STATUS_OK;
}

enum status table_parse(const struct document_bytes *bytes, struct table *table, struct message *why)
{
    *table = (struct table){0};
    struct making making = {.bytes = bytes, .text = malloc(bytes->size + 1)};
    if (!making.text) return status_fail(why, STATUS_INTERNAL, "%s: no memory", bytes->path);
    memcpy(making.text, bytes->data, bytes->size);
    making.text[bytes->size] = '\0';
    making.table.text = making.text;
    const enum status status =
        memchr(bytes->data, '\0', bytes->size)
            ? status_fail(why, STATUS_DOCUMENT, "%s:1:1: table: holds a zero octet", bytes->path)
            : make_table(&making, why);
    if (status == STATUS_OK)
        *table = making.table;
    else
        table_free(&making.table);
    return status;
}

void table_free(struct table *table)
{
    free(table->name);
    free(table->cell);
    free(table->line);
    free(table->text);
    *table = (struct table){0};
}

long table_column(const struct table *table, const char *name)
{
    for (size_t i = 0; i < table->columns; i++)
        if (strcmp(table->name[i], name) == 0) return (long)i;
    return -1;
}

enum status table_number(const struct table *table, const char *path, size_t row, size_t column, double least,
                         double most, double *value, struct message *why)
{
    const char *text = table->cell[row * table->columns + column];
    while (*text == ' ' || *text == '\t') text++;
    size_t length = strlen(text);
    while (length && (text[length - 1] == ' ' || text[length - 1] == '\t')) length--;
    double read = 0;
    if (number_read(text, length, &read) && read >= least && read <= most) {
        *value = read;
        return STATUS_OK;
    }
    return status_fail(why, STATUS_DOCUMENT, "%s:%zu:%zu: %s: holds %.60s, may hold a number from %g to %g",
                       path, table->line[row], column + 1, table->name[column], *text ? text : "nothing",
                       least, most);
}

/* The needed columns of a table, by name. */
static enum status find_columns(const struct table *table, const char *path, const char *const *names,
                                size_t *columns, struct message *why)
{
    for (size_t i = 0; names[i]; i++) {
        const long column = table_column(table, names[i]);
        if (column < 0)
            return status_fail(why, STATUS_DOCUMENT, "%s:1:1: %s: is no column here, the header may hold it",
                               path, names[i]);
        columns[i] = (size_t)column;
    }
    return STATUS_OK;
}

static enum status read_channel(const struct table *table, const char *path, size_t row,
                                struct pulses_table *pulses, struct message *why)
{
    double channel = 1;
    const long column = table_column(table, "channel"), muscle = table_column(table, "muscle");
    if (column >= 0) {
        const enum status status = table_number(table, path, row, (size_t)column, 1, 255, &channel, why);
        if (status != STATUS_OK) return status;
        if (channel < floor(channel) || channel > floor(channel))
            return status_fail(why, STATUS_DOCUMENT, "%s:%zu:%ld: channel: holds %g, may hold a whole number",
                               path, table->line[row], column + 1, channel);
        pulses->channel[row] = (unsigned)channel;
    }
    if (muscle >= 0)
        (void)snprintf(pulses->muscle[row], NAME_SIZE, "%s",
                       table->cell[row * table->columns + (size_t)muscle]);
    return STATUS_OK;
}

/* Rows rise in time; on one channel they stand at least 1 us apart. */
static enum status check_order(const struct pulses_table *pulses, const struct table *table, const char *path,
                               size_t row, size_t column, double *last, struct message *why)
{
    const double time_ms = pulses->pulse[row].time_ms;
    const unsigned channel = pulses->channel ? pulses->channel[row] : 1;
    if (row > 0 && time_ms < pulses->pulse[row - 1].time_ms)
        return status_fail(why, STATUS_DOCUMENT,
                           "%s:%zu:%zu: time_ms: holds %.17g, may hold at least the row before, %.17g", path,
                           table->line[row], column + 1, time_ms, pulses->pulse[row - 1].time_ms);
    if (time_ms - last[channel] < 0.001 - 1e-9)
        return status_fail(
            why, STATUS_DOCUMENT,
            "%s:%zu:%zu: time_ms: holds %.17g, less than 1 us after the pulse before on channel %u", path,
            table->line[row], column + 1, time_ms, channel);
    last[channel] = time_ms;
    return STATUS_OK;
}

static enum status fill_pulses(const struct table *table, const char *path, struct pulses_table *pulses,
                               struct message *why)
{
    static const char *const names[] = {"time_ms", "duration_us", "current_ma", NULL};
    size_t column[3] = {0};
    double last[256];
    for (int i = 0; i < 256; i++) last[i] = -HUGE_VAL;
    enum status status = find_columns(table, path, names, column, why);
    for (size_t row = 0; status == STATUS_OK && row < table->rows; row++) {
        struct train_pulse *pulse = &pulses->pulse[row];
        if ((status = table_number(table, path, row, column[0], 0, 1e9, &pulse->time_ms, why)) != STATUS_OK)
            break;
        if ((status = table_number(table, path, row, column[1], 0, 10000, &pulse->duration_us, why)) !=
            STATUS_OK)
            break;
        if ((status = table_number(table, path, row, column[2], 0, 1000, &pulse->current_ma, why)) !=
            STATUS_OK)
            break;
        pulses->line[row] = table->line[row];
        if ((status = read_channel(table, path, row, pulses, why)) != STATUS_OK) break;
        status = check_order(pulses, table, path, row, column[0], last, why);
    }
    return status;
}

enum status pulses_parse(const struct document_bytes *bytes, struct pulses_table *pulses, struct message *why)
{
    struct table table;
    *pulses = (struct pulses_table){0};
    enum status status = table_parse(bytes, &table, why);
    if (status != STATUS_OK) return status;
    struct pulses_table made = {.pulses = table.rows,
                                .pulse = calloc(table.rows + 1, sizeof *made.pulse),
                                .line = calloc(table.rows + 1, sizeof *made.line)};
    if (table_column(&table, "channel") >= 0) made.channel = calloc(table.rows + 1, sizeof *made.channel);
    if (table_column(&table, "muscle") >= 0) made.muscle = calloc(table.rows + 1, sizeof *made.muscle);
    const bool memory = made.pulse && made.line && (made.channel || table_column(&table, "channel") < 0) &&
                        (made.muscle || table_column(&table, "muscle") < 0);
    status = memory ? fill_pulses(&table, bytes->path, &made, why)
                    : status_fail(why, STATUS_INTERNAL, "%s: no memory", bytes->path);
    table_free(&table);
    if (status == STATUS_OK)
        *pulses = made;
    else
        pulses_free(&made);
    return status;
}

enum status pulses_load(const char *path, struct pulses_table *pulses, struct message *why)
{
    struct document_bytes bytes;
    enum status status = document_read_bytes(path, &bytes, why);
    if (status != STATUS_OK) return status;
    status = pulses_parse(&bytes, pulses, why);
    document_bytes_free(&bytes);
    return status;
}

void pulses_print(const struct pulses_table *pulses, const char *approval, struct text_out *out)
{
    char number[3][32];
    text_out_print(out, "time_ms,duration_us,current_ma%s%s%s\n", pulses->channel ? ",channel" : "",
                   pulses->muscle ? ",muscle" : "", approval ? ",approval" : "");
    for (size_t i = 0; i < pulses->pulses; i++) {
        const struct train_pulse *pulse = &pulses->pulse[i];
        text_out_print(out, "%s,%s,%s", number_text(pulse->time_ms, number[0]),
                       number_text(pulse->duration_us, number[1]), number_text(pulse->current_ma, number[2]));
        if (pulses->channel) text_out_print(out, ",%u", pulses->channel[i]);
        if (pulses->muscle)
            text_out_print(out, ",%s", pulses->muscle[i]); /* names are codes: no comma, no quote */
        if (approval) text_out_print(out, ",\"%s\"", approval);
        text_out_print(out, "\n");
    }
}

void pulses_free(struct pulses_table *pulses)
{
    free(pulses->pulse);
    free(pulses->channel);
    free(pulses->muscle);
    free(pulses->line);
    *pulses = (struct pulses_table){0};
}

static enum status fill_motion(const struct table *table, const char *path, struct motion *motion,
                               struct message *why)
{
    static const char *const names[] = {"time_ms", "relative_length", "relative_velocity", NULL};
    size_t column[3] = {0};
    enum status status = find_columns(table, path, names, column, why);
    if (status == STATUS_OK && table->rows < 2)
        return status_fail(why, STATUS_DOCUMENT, "%s:2:1: rows: a motion holds %zu, may hold 2 or more", path,
                           table->rows);
    for (size_t row = 0; status == STATUS_OK && row < table->rows; row++) {
        if ((status = table_number(table, path, row, column[0], 0, 1e9, &motion->time_ms[row], why)) !=
            STATUS_OK)
            break;
        if ((status = table_number(table, path, row, column[1], 0.1, 3, &motion->relative_length[row],
                                   why)) != STATUS_OK)
            break;
        if ((status = table_number(table, path, row, column[2], -10, 10, &motion->relative_velocity[row],
                                   why)) != STATUS_OK)
            break;
        if (row > 0 && !(motion->time_ms[row] > motion->time_ms[row - 1]))
            return status_fail(why, STATUS_DOCUMENT,
                               "%s:%zu:%zu: time_ms: holds %.17g, may hold more than the row before", path,
                               table->line[row], column[0] + 1, motion->time_ms[row]);
        motion->samples = row + 1;
    }
    return status;
}

static bool same(double a, double b)
{
    return fabs(a - b) <= 1e-12 * (fabs(a) + fabs(b));
}

enum status motion_load(const char *path, struct motion *motion, struct message *why)
{
    struct document_bytes bytes;
    struct table table;
    *motion = (struct motion){0};
    enum status status = document_read_bytes(path, &bytes, why);
    if (status != STATUS_OK) return status;
    status = table_parse(&bytes, &table, why);
    document_bytes_free(&bytes);
    if (status != STATUS_OK) return status;
    struct motion made = {.time_ms = calloc(table.rows + 1, sizeof(double)),
                          .relative_length = calloc(table.rows + 1, sizeof(double)),
                          .relative_velocity = calloc(table.rows + 1, sizeof(double))};
    if (made.time_ms && made.relative_length && made.relative_velocity)
        status = fill_motion(&table, path, &made, why);
    else
        status = status_fail(why, STATUS_INTERNAL, "%s: no memory", path);
    table_free(&table);
    if (status != STATUS_OK) {
        motion_free(&made);
        return status;
    }
    const size_t end = made.samples - 1;
    made.periodic = same(made.relative_length[0], made.relative_length[end]) &&
                    same(made.relative_velocity[0], made.relative_velocity[end]);
    *motion = made;
    return STATUS_OK;
}

void motion_free(struct motion *motion)
{
    free(motion->time_ms);
    free(motion->relative_length);
    free(motion->relative_velocity);
    *motion = (struct motion){0};
}

void trace_print(const struct trace *trace, struct text_out *out)
{
    text_out_print(out, "time_ms,force_n,capacity,potentiation,force_remaining_20,force_remaining_50\n");
    for (size_t i = 0; i < trace->samples; i++) {
        char number[32];
        text_out_print(out, "%s,%.17g,%.17g,%.17g,%.17g,%.17g\n", number_text(trace->time_ms[i], number),
                       trace->force_n[i], trace->capacity[i], trace->potentiation[i],
                       trace->force_remaining_20[i], trace->force_remaining_50[i]);
    }
}
