#include "cli/sheet_text.h"

#include <string.h>

#include "calib/quoted_text.h"
#include "cli/settings.h"

enum { MOST_KEYS = 4000 };

typedef struct {
    RfSheetText *sheet;
    char *group; /* the one that lines belong to now */
    unsigned line;
} Scan;

static void entry_free(void *data)
{
    RfSheetEntry *entry = data;
    g_free(entry->group);
    g_free(entry->key);
    g_free(entry->value);
    g_free(entry);
}

void rf_sheet_text_free(RfSheetText *sheet)
{
    if (!sheet) return;
    g_free(sheet->path);
    g_ptr_array_unref(sheet->entries);
    g_hash_table_unref(sheet->groups);
    g_key_file_unref(sheet->key_file);
    g_free(sheet);
}

const RfSheetEntry *rf_sheet_text_find(const RfSheetText *sheet, const char *group, const char *key)
{
    for (unsigned i = 0; i < sheet->entries->len; i++) {
        const RfSheetEntry *entry = sheet->entries->pdata[i];
        if (strcmp(entry->group, group) == 0 && strcmp(entry->key, key) == 0) return entry;
    }
    return NULL;
}

static bool refuse(const Scan *scan, GError **error, const char *format, ...) G_GNUC_PRINTF(3, 4);
static bool refuse(const Scan *scan, GError **error, const char *format, ...)
{
    va_list arguments;
    va_start(arguments, format);
    g_autofree char *what = g_strdup_vprintf(format, arguments);
    va_end(arguments);
    g_set_error(error, RF_SETTINGS_ERROR, RF_SETTINGS_ERROR_FILE, "%s: line %u: %s", scan->sheet->path,
                scan->line, what);
    return false;
}

static bool take_group(Scan *scan, char *line, GError **error)
{
    char *end = strchr(line, ']');
    g_autofree char *seen = rf_quoted_text(line);
    if (!end || end[1] != '\0' || end == line + 1)
        return refuse(scan, error, "seen `%s`; a group's line is its name in brackets, such as [cell]", seen);
    *end = '\0';
    unsigned before = GPOINTER_TO_UINT(g_hash_table_lookup(scan->sheet->groups, line + 1));
    if (before)
        return refuse(scan, error, "[%s] stands here and in line %u; a group may stand once", line + 1,
                      before);
    g_free(scan->group);
    scan->group = g_strdup(line + 1);
    g_hash_table_insert(scan->sheet->groups, g_strdup(scan->group), GUINT_TO_POINTER(scan->line));
    return true;
}

static bool take_key(Scan *scan, char *line, GError **error)
{
    char *equals = strchr(line, '=');
    g_autofree char *seen = rf_quoted_text(line);
    if (!equals || equals == line)
        return refuse(scan, error, "seen `%s`; a line is [group], key=value, a # comment, or blank", seen);
    *equals = '\0';
    const char *key = g_strchomp(line);
    if (!scan->group)
        return refuse(scan, error, "`%s` stands before the first group; a [group] line is needed above",
                      seen);
    if (scan->sheet->entries->len >= MOST_KEYS)
        return refuse(scan, error, "more than %d keys; a run sheet is a short text", MOST_KEYS);
    const RfSheetEntry *before = rf_sheet_text_find(scan->sheet, scan->group, key);
    if (before)
        return refuse(scan, error, "[%s] %s: stands here and in line %u; a key may stand once", scan->group,
                      key, before->line);
    RfSheetEntry *entry = g_new0(RfSheetEntry, 1);
    *entry = (RfSheetEntry){g_strdup(scan->group), g_strdup(key), NULL, scan->line};
    g_ptr_array_add(scan->sheet->entries, entry);
    return true;
}

static bool take_line(Scan *scan, char *line, GError **error)
{
    if (!g_utf8_validate(line, -1, NULL))
        return refuse(scan, error, "seen bytes that aren't UTF-8; saved as UTF-8 the sheet would do");
    g_strstrip(line);
    if (*line == '\0' || *line == '#') return true;
    return *line == '[' ? take_group(scan, line, error) : take_key(scan, line, error);
}

static bool take_lines(RfSheetText *sheet, const char *text, GError **error)
{
    Scan scan = {sheet, NULL, 0};
    g_auto(GStrv) lines = g_strsplit(text, "\n", -1);
    bool is_good = true;
    for (size_t i = 0; lines[i] && is_good; i++) {
        scan.line = (unsigned)i + 1;
        is_good = take_line(&scan, lines[i], error);
    }
    g_free(scan.group);
    return is_good;
}

/* GKeyFile sets one error over another where a value has two such mistakes. */
static bool check_escapes(const RfSheetText *sheet, const RfSheetEntry *entry, GError **error)
{
    g_autofree char *raw = g_key_file_get_value(sheet->key_file, entry->group, entry->key, NULL);
    for (const char *at = raw; at && (at = strchr(at, '\\')); at += 2) {
        if (at[1] != '\0' && strchr("sntr\\", at[1])) continue;
        g_autofree char *seen = rf_quoted_text(raw);
        g_set_error(error, RF_SETTINGS_ERROR, RF_SETTINGS_ERROR_FILE,
                    "%s: line %u: [%s] %s: seen `%s`; a backslash is written twice here, as in C:\\\\data",
                    sheet->path, entry->line, entry->group, entry->key, seen);
        return false;
    }
    return true;
}

static bool read_values(RfSheetText *sheet, const char *text, GError **error)
{
    g_autoptr(GError) why = NULL;
    if (!g_key_file_load_from_data(sheet->key_file, text, strlen(text), G_KEY_FILE_NONE, &why)) {
        g_set_error(error, RF_SETTINGS_ERROR, RF_SETTINGS_ERROR_FILE, "%s: isn't a key file: %s", sheet->path,
                    why->message);
        return false;
    }
    for (unsigned i = 0; i < sheet->entries->len; i++) {
        RfSheetEntry *entry = sheet->entries->pdata[i];
        bool is_note = strcmp(entry->group, "notes") == 0; /* word for word: a backslash is a backslash */
        if (!is_note && !check_escapes(sheet, entry, error)) return false;
        entry->value = is_note ? g_key_file_get_value(sheet->key_file, entry->group, entry->key, &why)
                               : g_key_file_get_string(sheet->key_file, entry->group, entry->key, &why);
        if (!entry->value || why) { /* an invalid escape gives both */
            g_set_error(error, RF_SETTINGS_ERROR, RF_SETTINGS_ERROR_FILE,
                        "%s: line %u: [%s] %s: can't be read: %s", sheet->path, entry->line, entry->group,
                        entry->key, why ? why->message : "nothing there");
            return false;
        }
        g_strstrip(entry->value);
    }
    return true;
}

static char *without_marks(const char *text, size_t length)
{
    if (length >= 3 && memcmp(text, "\xef\xbb\xbf", 3) == 0) {
        text += 3;
        length -= 3;
    }
    g_auto(GStrv) pieces = NULL;
    g_autofree char *copy = g_strndup(text, length);
    pieces = g_strsplit(copy, "\r\n", -1);
    return g_strjoinv("\n", pieces);
}

RfSheetText *rf_sheet_text_parse(const char *text, size_t length, const char *path, GError **error)
{
    const char *what = NULL;
    if (length > 1 << 20)
        what = "larger than 1 MiB; a run sheet is a short text";
    else if (length >= 2 && (memcmp(text, "\xff\xfe", 2) == 0 || memcmp(text, "\xfe\xff", 2) == 0))
        what = "seen UTF-16 text; saved as UTF-8 it would do";
    else if (length && memchr(text, '\0', length))
        what = "seen binary data; a run sheet is a text of [group] and key=value lines";
    if (what) {
        g_set_error(error, RF_SETTINGS_ERROR, RF_SETTINGS_ERROR_FILE, "%s: %s", path, what);
        return NULL;
    }
    g_autofree char *plain = without_marks(text, length);
    g_autoptr(RfSheetText) sheet = g_new0(RfSheetText, 1);
    sheet->path = g_strdup(path);
    sheet->entries = g_ptr_array_new_with_free_func(entry_free);
    sheet->groups = g_hash_table_new_full(g_str_hash, g_str_equal, g_free, NULL);
    sheet->key_file = g_key_file_new();
    if (!take_lines(sheet, plain, error) || !read_values(sheet, plain, error)) return NULL;
    return g_steal_pointer(&sheet);
}
