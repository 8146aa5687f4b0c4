#include "cli/json_rows.h"

#include <stdbool.h>
#include <string.h>

void rf_json_rows_append_string(GString *out, const char *text)
{
    g_autofree char *valid = g_utf8_make_valid(text, -1);
    g_string_append_c(out, '"');
    for (const char *c = valid; *c; c++) {
        if ((unsigned char)*c < 0x20)
            g_string_append_printf(out, "\\u%04x", (unsigned)*c);
        else {
            if (*c == '"' || *c == '\\') g_string_append_c(out, '\\');
            g_string_append_c(out, *c);
        }
    }
    g_string_append_c(out, '"');
}

typedef struct {
    char *text;
    bool is_quoted;
} Cell;

static void clear_cell(Cell *cell)
{
    g_free(cell->text);
}

/* The row at *at, which is moved on to the next. Cells are Cell. (returns new) */
static GArray *next_row(const char **at)
{
    GArray *cells = g_array_new(FALSE, FALSE, sizeof(Cell));
    g_array_set_clear_func(cells, (GDestroyNotify)clear_cell);
    g_autoptr(GString) text = g_string_new(NULL);
    bool is_inside = false, is_quoted = false;
    for (const char *c = *at;; c++) {
        if (*c == '"') {
            if (is_inside && c[1] == '"')
                g_string_append_c(text, *++c);
            else
                is_inside = !is_inside;
            is_quoted = true;
        } else if (*c && (is_inside || (*c != ',' && *c != '\n'))) {
            g_string_append_c(text, *c);
        } else {
            const Cell cell = {g_strdup(text->str), is_quoted};
            g_array_append_val(cells, cell);
            g_string_truncate(text, 0);
            is_quoted = false;
            if (*c == ',') continue;
            *at = *c ? c + 1 : c;
            return cells;
        }
    }
}

/* As JSON writes numbers: no leading zeros, digits on both sides of a point. */
static bool is_number(const char *text)
{
    return g_regex_match_simple("^-?(0|[1-9][0-9]*)(\\.[0-9]+)?([eE][-+]?[0-9]+)?$", text, 0, 0);
}

static void append_value(GString *out, const Cell *cell)
{
    if (!*cell->text && !cell->is_quoted)
        g_string_append(out, "null");
    else if (!cell->is_quoted && is_number(cell->text))
        g_string_append(out, cell->text);
    else
        rf_json_rows_append_string(out, cell->text);
}

static void append_row(GString *out, const GArray *names, const GArray *cells)
{
    g_string_append_c(out, '{');
    for (guint i = 0; i < names->len && i < cells->len; i++) {
        g_string_append(out, i ? ", " : "");
        rf_json_rows_append_string(out, g_array_index(names, Cell, i).text);
        g_string_append(out, ": ");
        append_value(out, &g_array_index(cells, Cell, i));
    }
    g_string_append_c(out, '}');
}

void rf_json_rows_append(GString *out, const char *csv, int indent)
{
    g_autoptr(GArray) names = next_row(&csv);
    g_string_append_c(out, '[');
    for (bool is_first = true; *csv; is_first = false) {
        g_autoptr(GArray) cells = next_row(&csv);
        g_string_append_printf(out, "%s\n%*s", is_first ? "" : ",", indent, "");
        append_row(out, names, cells);
    }
    g_string_append_c(out, ']');
}
