/* Tables (CSV, RFC 4180, header row): pulses, traces, motions. Numbers are written with 17 significant digits
 * where needed; readers ignore further columns; a bad cell is told by file:line:column. */
#ifndef PULSEWRIGHT_CORE_DOCUMENT_TABLE_H
#define PULSEWRIGHT_CORE_DOCUMENT_TABLE_H
#include "core/document/document.h"
#include "core/predict/predict.h"
#include "core/train/contraction.h"

/* Pulses with further columns where there are several channels. */
struct pulses_table {
    size_t pulses;
    struct train_pulse *pulse;
    unsigned *channel;         /* NULL where there is no such column */
    char (*muscle)[NAME_SIZE]; /* NULL where there is no such column */
    size_t *line;              /* of each row in the file; NULL in a table that was not read */
};
/* Rows in ascending time, at least 1 us apart on a channel, durations and currents finite and not negative.
 */
enum status pulses_parse(const struct document_bytes *bytes, struct pulses_table *table, struct message *why);
enum status pulses_load(const char *path, struct pulses_table *table, struct message *why);
/* approval: text of the last column on every row, NULL: no such column. */
void pulses_print(const struct pulses_table *table, const char *approval, struct text_out *out);
void pulses_free(struct pulses_table *table);
enum status motion_load(const char *path, struct motion *motion, struct message *why);
void motion_free(struct motion *motion);
void trace_print(const struct trace *trace, struct text_out *out);

/* A generic reader for the others: header names and rows of text cells. */
struct table {
    size_t columns, rows;
    char **name;  /* columns */
    char **cell;  /* rows x columns */
    size_t *line; /* of each row in the file */
    char *text;   /* what the cells point into */
};
enum status table_parse(const struct document_bytes *bytes, struct table *table, struct message *why);
void table_free(struct table *table);
/* Index of a column, -1 where there is none. */
long table_column(const struct table *table, const char *name);
/* A cell as a strict decimal within a range; the message names file, line and column (the cell's number). */
enum status table_number(const struct table *table, const char *path, size_t row, size_t column, double least,
                         double most, double *value, struct message *why);

#endif
