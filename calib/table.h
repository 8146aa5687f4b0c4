/* Delimited text as spreadsheets and people write it: commas, semicolons or tabs; decimal points or commas; quotes (also over
 * several lines); CRLF; a byte-order mark; blank rows; rows that begin with #; columns in any order; units in headers.
 * Not for the program's own output, and never guesses: what can be read in two ways is an error.
 *
 * Column names are compared in lower case with blanks as underscores and a unit in brackets as a suffix: `Time (s)`,
 * `time [s]` and `TIME_S` are all time_s. Reading is safe from any thread; a table never changes once made. */
#pragma once

#include <glib.h>
#include <stdbool.h>
#include <stddef.h>

typedef enum {
    RF_TABLE_ERROR_FILE,   /* can't be read, or isn't text */
    RF_TABLE_ERROR_SHAPE,  /* header or rows don't fit together */
    RF_TABLE_ERROR_COLUMN, /* a column that is needed isn't there */
    RF_TABLE_ERROR_CELL,   /* what a cell holds won't do */
} RfTableError;

#define RF_TABLE_ERROR (rf_table_error_quark())
GQuark rf_table_error_quark(void);

typedef struct RfTable RfTable;

/* (returns new) or NULL. Errors begin with the path, and name line and column. At most 1 GiB. */
RfTable *rf_table_read(const char *path, GError **error);
/* The same from memory; `name` stands for the path in errors. */
RfTable *rf_table_parse(const char *text, size_t length, const char *name, GError **error);
void rf_table_free(RfTable *table);
G_DEFINE_AUTOPTR_CLEANUP_FUNC(RfTable, rf_table_free)

size_t rf_table_rows(const RfTable *table);
size_t rf_table_columns(const RfTable *table);
/* As first written, trimmed (borrowed from the table). */
const char *rf_table_header(const RfTable *table, size_t column);
/* Where the row begins in the file, from 1: for messages. */
size_t rf_table_line(const RfTable *table, size_t row);

/* Index of a column, or -1. */
int rf_table_find(const RfTable *table, const char *name);
/* The same, but a missing column is an error that lists those seen. */
bool rf_table_require(const RfTable *table, const char *name, size_t *column, GError **error);

/* A column of a quantity in whatever unit its header names: base "time", unit "s" finds `time_s`, `Time (ms)`,
 * `time [min]`, and a bare `time` as being in `unit`. number * scale is in `unit`. -1 if none. */
int rf_table_find_quantity(const RfTable *table, const char *base, const char *unit, double *scale);

/* Trimmed, valid UTF-8, "" where the row is short or blank there (borrowed from the table). */
const char *rf_table_text(const RfTable *table, size_t row, size_t column);
bool rf_table_is_blank(const RfTable *table, size_t row, size_t column);
/* Finite number, or an error naming line and column. Blank is an error too: ask rf_table_is_blank first. */
bool rf_table_number(const RfTable *table, size_t row, size_t column, double *number, GError **error);
/* A whole number from 0 to 2^53. */
bool rf_table_whole(const RfTable *table, size_t row, size_t column, guint64 *number, GError **error);
/* An error about a cell, in the table's own form: "timings.csv: line 4, column time_s: seen `abc`, needed ...". */
void rf_table_cell_error(const RfTable *table, size_t row, size_t column, const char *needed, GError **error);
