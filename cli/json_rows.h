/* A table in our own CSV as JSON objects, so that both say the same to the last digit: a column's name is the key, a number
 * stays the text it is, an empty cell is null, all else is a string. */
#pragma once

#include <glib.h>

/* Appends `[{...}, ...]`, an object a line, indented by `indent`; without a newline at the end. */
void rf_json_rows_append(GString *out, const char *csv, int indent);

/* In quotes, with what JSON asks to be escaped; bytes that aren't UTF-8 are marked. */
void rf_json_rows_append_string(GString *out, const char *text);
