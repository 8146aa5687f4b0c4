/* Running text broken into lines for a terminal. */
#pragma once

#include <glib.h>
#include <stdbool.h>

/* Appends `text` in lines of at most `columns` characters, each begun with `indent` blanks and ended with a newline; words
 * longer than a line stay whole. The first line's indent is left out if `is_begun`: something stands there already,
 * up to column `indent`. White space in `text` only separates words. Bytes that aren't UTF-8 count as a column each. */
void rf_text_wrap_append(GString *out, const char *text, int indent, int columns, bool is_begun);

/* Columns that UTF-8 text takes, one a character. */
int rf_text_wrap_width(const char *text);

/* Columns of the terminal on `fd` between 80 and 120; 80 where there is none. */
int rf_text_wrap_terminal_columns(int fd);
