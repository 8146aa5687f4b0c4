#include "calib/table.h"

#include <math.h>
#include <stdint.h>
#include <string.h>

#include "calib/quantity.h"
#include "calib/quoted_text.h"

GQuark rf_table_error_quark(void)
{
    return g_quark_from_static_string("rf-table-error-quark");
}

static const size_t most_bytes = (size_t)1 << 30;

typedef struct {
    uint32_t offset; /* into the text, where the cell's own terminated text begins */
    bool is_quoted;
} Cell;

typedef struct {
    uint32_t first, cells; /* of the table's */
    uint32_t line;         /* where it begins */
} Row;

struct RfTable {
    char *name;
    char *text; /* a copy of the file, cells unquoted and terminated in place */
    char delimiter;
    size_t columns;
    GArray *cells;   /* Cell: header first, then rows, each as long as it was written */
    GArray *rows;    /* Row */
    GPtrArray *keys; /* char*: the headers as they are compared */
    uint32_t blank;  /* offset of an empty string */
};

void rf_table_free(RfTable *table)
{
    if (!table) return;
    g_free(table->name);
    g_free(table->text);
    g_array_unref(table->cells);
    g_array_unref(table->rows);
    g_ptr_array_unref(table->keys);
    g_free(table);
}

static const Cell *header_at(const RfTable *table, size_t column)
{
    return &g_array_index(table->cells, Cell, column);
}

/* A row that is shorter than the header is blank from its end on. */
static Cell cell_at(const RfTable *table, size_t row, size_t column)
{
    const Row *here = &g_array_index(table->rows, Row, row);
    return column < here->cells ? g_array_index(table->cells, Cell, here->first + column)
                                : (Cell){table->blank, false};
}

size_t rf_table_rows(const RfTable *table)
{
    return table->rows->len;
}

size_t rf_table_columns(const RfTable *table)
{
    return table->columns;
}

const char *rf_table_header(const RfTable *table, size_t column)
{
    return table->text + header_at(table, column)->offset;
}

size_t rf_table_line(const RfTable *table, size_t row)
{
    return g_array_index(table->rows, Row, row).line;
}

const char *rf_table_text(const RfTable *table, size_t row, size_t column)
{
    return table->text + cell_at(table, row, column).offset;
}

bool rf_table_is_blank(const RfTable *table, size_t row, size_t column)
{
    return rf_table_text(table, row, column)[0] == '\0';
}

/* Where the reader stands in the text. */
typedef struct {
    RfTable *table;
    char *at;
    char delimiter;
    uint32_t line;
    GArray *row; /* Cell */
} Reader;

static bool is_line_end(char c)
{
    return c == '\n' || c == '\r' || c == '\0';
}

static void skip_line_end(Reader *r)
{
    if (*r->at == '\r') *r->at++ = '\0';
    if (*r->at == '\n') *r->at++ = '\0';
    r->line++;
}

static bool shape_error(const Reader *r, GError **error, const char *format, ...) G_GNUC_PRINTF(3, 4);
static bool shape_error(const Reader *r, GError **error, const char *format, ...)
{
    va_list arguments;
    va_start(arguments, format);
    g_autofree char *what = g_strdup_vprintf(format, arguments);
    va_end(arguments);
    g_set_error(error, RF_TABLE_ERROR, RF_TABLE_ERROR_SHAPE, "%s: line %u: %s", r->table->name, r->line,
                what);
    return false;
}

/* A quoted cell is unquoted in place: what it holds is never longer than what is written. */
static bool take_quoted(Reader *r, Cell *cell, GError **error)
{
    uint32_t first_line = r->line;
    char *to = r->at;
    cell->offset = (uint32_t)(r->at - r->table->text);
    cell->is_quoted = true;
    for (r->at++; *r->at; r->at++) {
        if (*r->at == '"' && r->at[1] != '"') break;
        if (*r->at == '"') r->at++;
        if (*r->at == '\n') r->line++;
        *to++ = *r->at;
    }
    if (*r->at != '"') {
        r->line = first_line;
        return shape_error(r, error, "a quote is opened here and never closed; a closing \" is needed");
    }
    r->at++;
    while (*r->at == ' ' || (*r->at == '\t' && r->delimiter != '\t')) r->at++;
    if (!is_line_end(*r->at) && *r->at != r->delimiter) {
        g_autofree char *line = g_strndup(r->at, strcspn(r->at, "\r\n")), *seen = rf_quoted_text(line);
        return shape_error(r, error, "seen `%s` after a closing quote; the separator `%c` is needed", seen,
                           r->delimiter);
    }
    *to = '\0';
    return true;
}

static void take_plain(Reader *r, Cell *cell)
{
    char *begin = r->at;
    while (!is_line_end(*r->at) && *r->at != r->delimiter) r->at++;
    char *end = r->at;
    while (end > begin && g_ascii_isspace(end[-1])) end--;
    cell->offset = (uint32_t)(begin - r->table->text);
    cell->is_quoted = false;
    if (end < r->at) *end = '\0';
}

/* One row's cells; the separator behind a cell becomes its terminator once it has been looked at. */
static bool take_row(Reader *r, GError **error)
{
    g_array_set_size(r->row, 0);
    for (;;) {
        Cell cell;
        while (*r->at == ' ' || (*r->at == '\t' && r->delimiter != '\t')) r->at++;
        if (*r->at == '"') {
            if (!take_quoted(r, &cell, error)) return false;
        } else {
            take_plain(r, &cell);
        }
        g_array_append_val(r->row, cell);
        if (*r->at != r->delimiter) break;
        *r->at++ = '\0';
    }
    if (*r->at) skip_line_end(r);
    return true;
}

static bool is_row_blank(const Reader *r)
{
    for (unsigned i = 0; i < r->row->len; i++)
        if (r->table->text[g_array_index(r->row, Cell, i).offset]) return false;
    return true;
}

/* Leaves the reader at the next line that isn't blank and isn't a comment; false at the end. */
static bool skip_to_row(Reader *r)
{
    while (*r->at) {
        char *here = r->at;
        while (*here == ' ' || (*here == '\t' && r->delimiter != '\t')) here++;
        if (*here != '#' && !is_line_end(*here)) return true;
        while (!is_line_end(*r->at)) r->at++;
        if (*r->at) skip_line_end(r);
    }
    return false;
}

/* Only the header tells: it holds names, so a comma there is never decimal. */
static char guess_delimiter(const char *header)
{
    bool is_quoted = false, has_tab = false, has_semicolon = false;
    for (; *header && (is_quoted || !is_line_end(*header)); header++) {
        if (*header == '"') is_quoted = !is_quoted;
        if (is_quoted) continue;
        has_semicolon |= *header == ';';
        has_tab |= *header == '\t';
    }
    return has_semicolon ? ';' : has_tab ? '\t' : ',';
}

/* `Time (s)`, `time [s]` -> `time_s`. (returns new) */
static char *key_of_header(const char *header)
{
    GString *key = g_string_new(NULL);
    for (const char *c = header; *c; c++) {
        char letter = g_ascii_tolower(*c);
        if (letter == ']' || letter == ')') continue;
        if (letter == ' ' || letter == '(' || letter == '[') letter = '_';
        if (letter == '_' && (key->len == 0 || key->str[key->len - 1] == '_')) continue;
        g_string_append_c(key, letter);
    }
    while (key->len && key->str[key->len - 1] == '_') g_string_truncate(key, key->len - 1);
    return g_string_free(key, false);
}

static bool take_keys(Reader *r, GError **error)
{
    RfTable *table = r->table;
    g_autoptr(GHashTable) columns = g_hash_table_new(g_str_hash, g_str_equal); /* key -> column, from 1 */
    for (size_t i = 0; i < table->columns; i++) {
        char *key = key_of_header(rf_table_header(table, i));
        g_ptr_array_add(table->keys, key);
        size_t before = GPOINTER_TO_SIZE(g_hash_table_lookup(columns, key));
        if (before > 0) {
            g_autofree char *header = rf_quoted_text(rf_table_header(table, i));
            return shape_error(r, error,
                               "the columns %zu and %zu are both called `%s`; each name may stand once",
                               before, i + 1, header);
        }
        if (*key) g_hash_table_insert(columns, key, GSIZE_TO_POINTER(i + 1));
    }
    return true;
}

static bool take_header(Reader *r, GError **error)
{
    RfTable *table = r->table;
    r->delimiter = '\n'; /* none yet: blank lines in front may hold tabs */
    if (!skip_to_row(r))
        return shape_error(r, error, "nothing there; a header row with column names is needed");
    table->delimiter = r->delimiter = guess_delimiter(r->at);
    uint32_t line = r->line;
    if (!take_row(r, error)) return false;
    /* spreadsheets leave empty columns behind the last */
    while (r->row->len > 1 && table->text[g_array_index(r->row, Cell, r->row->len - 1).offset] == '\0')
        g_array_set_size(r->row, r->row->len - 1);
    table->columns = r->row->len;
    g_array_append_vals(table->cells, r->row->data, r->row->len);
    r->line = line;
    if (!take_keys(r, error)) return false;
    r->line = line + 1;
    return true;
}

static bool add_row(Reader *r, uint32_t line, GError **error)
{
    RfTable *table = r->table;
    while (r->row->len > table->columns &&
           table->text[g_array_index(r->row, Cell, r->row->len - 1).offset] == '\0')
        g_array_set_size(r->row, r->row->len - 1);
    if (r->row->len > table->columns) {
        r->line = line;
        return shape_error(r, error, "seen %u cells, the header has %zu%s", r->row->len, table->columns,
                           table->delimiter == ',' ? "; decimal commas need semicolons or tabs between cells"
                                                   : "");
    }
    Row row = {table->cells->len, r->row->len, line};
    g_array_append_vals(table->cells, r->row->data, r->row->len);
    g_array_append_val(table->rows, row);
    return true;
}

static bool take_rows(Reader *r, GError **error)
{
    while (skip_to_row(r)) {
        uint32_t line = r->line;
        if (!take_row(r, error)) return false;
        if (!is_row_blank(r) && !add_row(r, line, error)) return false;
    }
    return true;
}

static bool refuse_file(const char *name, GError **error, const char *what)
{
    g_set_error(error, RF_TABLE_ERROR, RF_TABLE_ERROR_FILE, "%s: %s", name, what);
    return false;
}

static bool is_readable_text(const char *text, size_t length, const char *name, GError **error)
{
    if (length >= most_bytes)
        return refuse_file(name, error, "more than 1 GiB; that is no table made by a person");
    if (length >= 2 && (memcmp(text, "\xff\xfe", 2) == 0 || memcmp(text, "\xfe\xff", 2) == 0))
        return refuse_file(name, error, "seen UTF-16 text; saved as UTF-8 it would do");
    if (length && memchr(text, '\0', length))
        return refuse_file(name, error, "seen binary data; a text table is needed");
    return true;
}

/* A copy without byte-order mark, valid UTF-8 (strange bytes replaced), and with two zeros behind: the second is the blank cell. */
static char *prepare_text(const char *text, size_t length, uint32_t *blank)
{
    if (length >= 3 && memcmp(text, "\xef\xbb\xbf", 3) == 0) {
        text += 3;
        length -= 3;
    }
    g_autofree char *valid = g_utf8_make_valid(text, (gssize)length);
    size_t valid_length = strlen(valid);
    char *copy = g_malloc(valid_length + 2);
    memcpy(copy, valid, valid_length);
    copy[valid_length] = copy[valid_length + 1] = '\0';
    *blank = (uint32_t)valid_length + 1;
    return copy;
}

RfTable *rf_table_parse(const char *text, size_t length, const char *name, GError **error)
{
    if (!is_readable_text(text, length, name, error)) return NULL;
    g_autoptr(RfTable) table = g_new0(RfTable, 1);
    table->name = g_strdup(name);
    table->text = prepare_text(text, length, &table->blank);
    table->cells = g_array_new(false, false, sizeof(Cell));
    table->rows = g_array_new(false, false, sizeof(Row));
    table->keys = g_ptr_array_new_with_free_func(g_free);
    g_autoptr(GArray) row = g_array_new(false, false, sizeof(Cell));
    Reader reader = {table, table->text, ',', 1, row};
    if (!take_header(&reader, error) || !take_rows(&reader, error)) return NULL;
    return g_steal_pointer(&table);
}

RfTable *rf_table_read(const char *path, GError **error)
{
    g_autofree char *text = NULL;
    size_t length;
    g_autoptr(GError) why = NULL;
    if (!g_file_get_contents(path, &text, &length, &why)) {
        g_set_error(error, RF_TABLE_ERROR, RF_TABLE_ERROR_FILE, "table can't be read: %s", why->message);
        return NULL;
    }
    return rf_table_parse(text, length, path, error);
}

int rf_table_find(const RfTable *table, const char *name)
{
    g_autofree char *key = key_of_header(name);
    for (unsigned i = 0; i < table->keys->len; i++)
        if (strcmp(table->keys->pdata[i], key) == 0) return (int)i;
    return -1;
}

bool rf_table_require(const RfTable *table, const char *name, size_t *column, GError **error)
{
    int found = rf_table_find(table, name);
    if (found >= 0) {
        *column = (size_t)found;
        return true;
    }
    g_autoptr(GString) seen = g_string_new(NULL);
    for (size_t i = 0; i < table->columns && i < 20; i++) {
        g_autofree char *header = rf_quoted_text(rf_table_header(table, i));
        g_string_append_printf(seen, "%s%s", i ? ", " : "", header);
    }
    g_set_error(error, RF_TABLE_ERROR, RF_TABLE_ERROR_COLUMN, "%s: no column `%s`; seen: %s", table->name,
                name, seen->str);
    return false;
}

/* The unit as the header has it, case kept (mV and MV differ): what follows `base` in brackets or behind an underscore. */
static char *unit_of_header(const char *header, const char *base)
{
    g_autofree char *key = key_of_header(base);
    g_autofree char *whole = key_of_header(header);
    size_t skip = 0, matched = 0, key_length = strlen(key);
    if (!g_str_has_prefix(whole, key)) return NULL;
    if (whole[key_length] != '\0' && whole[key_length] != '_') return NULL;
    for (; header[skip] && matched < key_length; skip++) /* blanks and underscores in a row count once */
        if (g_ascii_tolower(header[skip]) == key[matched] ||
            (key[matched] == '_' && !g_ascii_isalnum(header[skip])))
            matched++;
    g_autofree char *rest = g_strdup(header + skip);
    g_strdelimit(rest, "_()[]", ' ');
    return g_strdup(g_strstrip(rest));
}

int rf_table_find_quantity(const RfTable *table, const char *base, const char *unit, double *scale)
{
    for (size_t i = 0; i < table->columns; i++) {
        double offset = 0.0;
        g_autofree char *seen = unit_of_header(rf_table_header(table, i), base);
        if (!seen) continue;
        *scale = 1.0;
        if (*seen == '\0' || g_ascii_strcasecmp(seen, unit) == 0) return (int)i;
        if (rf_quantity_conversion(seen, unit, scale, &offset, NULL) && offset == 0.0) return (int)i;
    }
    return -1;
}

void rf_table_cell_error(const RfTable *table, size_t row, size_t column, const char *needed, GError **error)
{
    g_autofree char *seen = rf_quoted_text(rf_table_text(table, row, column)),
                    *header = rf_quoted_text(rf_table_header(table, column));
    g_set_error(error, RF_TABLE_ERROR, RF_TABLE_ERROR_CELL, "%s: line %zu, column %s: seen `%s`, needed %s",
                table->name, rf_table_line(table, row), header, *seen ? seen : "(blank)", needed);
}

/* Into `room` with a decimal point and an ASCII minus. False for both marks in one number (1.234,56 could be thousands), and for
 * a comma where it separates cells, unless it stands inside quotes. */
static bool with_point(const RfTable *table, const char *text, bool is_quoted, char *room, size_t size)
{
    bool has_unicode_minus = g_str_has_prefix(text, "\xe2\x88\x92");
    if (has_unicode_minus) text += 2;
    if (strlen(text) >= size) return false;
    strcpy(room, text);
    if (has_unicode_minus) room[0] = '-';
    char *comma = strchr(room, ',');
    if (!comma) return true;
    bool may_be_decimal = table->delimiter != ',' || is_quoted;
    if (!may_be_decimal || strchr(room, '.') || strchr(comma + 1, ',')) return false;
    *comma = '.';
    return true;
}

bool rf_table_number(const RfTable *table, size_t row, size_t column, double *number, GError **error)
{
    char room[64], *end = room;
    const char *text = rf_table_text(table, row, column);
    /* g_ascii_strtod also takes hexadecimal, nan and inf */
    bool is_plain = with_point(table, text, cell_at(table, row, column).is_quoted, room, sizeof room) &&
                    strspn(room, "+-.0123456789eE") == strlen(room);
    double value = is_plain ? g_ascii_strtod(room, &end) : 0.0;
    if (!is_plain || end == room || *end || !isfinite(value)) {
        rf_table_cell_error(table, row, column, "a number", error);
        return false;
    }
    *number = value;
    return true;
}

bool rf_table_whole(const RfTable *table, size_t row, size_t column, guint64 *number, GError **error)
{
    double value;
    if (!rf_table_number(table, row, column, &value, error)) return false;
    if (!(value >= 0.0 && value <= 9007199254740992.0) || value != floor(value)) {
        rf_table_cell_error(table, row, column, "a whole number from 0 on", error);
        return false;
    }
    *number = (guint64)value;
    return true;
}
