#include "cli/hand_timings.h"

#include "calib/table.h"

#include <math.h>
#include <string.h>

enum { NONE = -1, MOST_LABEL = 200 };

static const double most_divisions = 1000, longest_s = 1e6;

typedef struct {
    const RfTable *table;
    int entry, label, motion, divisions, distance, time, voltage, start; /* NONE: not there */
    double distance_scale, time_scale, voltage_scale, start_scale;
} Sheet;

static int find_any(const RfTable *table, const char *const *names)
{
    for (; *names; names++) {
        int column = rf_table_find(table, *names);
        if (column >= 0) return column;
    }
    return NONE;
}

static bool require(const RfTable *table, int column, const char *name, GError **error)
{
    size_t found;
    return column >= 0 || rf_table_require(table, name, &found, error);
}

static bool find_columns(Sheet *sheet, GError **error)
{
    static const char *const entry[] = {"entry", "no", "number", NULL}, *const label[] = {"label", "droplet",
                                                                                          NULL};
    static const char *const motion[] = {"motion", "direction", NULL}, *const divisions[] = {"divisions",
                                                                                             "lines", NULL};
    const RfTable *table = sheet->table;
    sheet->entry = find_any(table, entry);
    sheet->label = find_any(table, label);
    sheet->motion = find_any(table, motion);
    sheet->divisions = find_any(table, divisions);
    sheet->distance = rf_table_find_quantity(table, "distance", "mm", &sheet->distance_scale);
    sheet->time = rf_table_find_quantity(table, "time", "s", &sheet->time_scale);
    sheet->voltage = rf_table_find_quantity(table, "voltage", "V", &sheet->voltage_scale);
    sheet->start = rf_table_find_quantity(table, "start", "s", &sheet->start_scale);
    return require(table, sheet->motion, "motion", error) && require(table, sheet->time, "time_s", error) &&
           (sheet->distance >= 0 || require(table, sheet->divisions, "divisions", error));
}

/* `1:23.4` and `14:03:22,5`: minutes and hours before the seconds, each part but the first below 60. */
static bool parse_clock(const char *text, double *time_s)
{
    char room[40];
    if (strlen(text) >= sizeof room) return false;
    strcpy(room, text);
    g_strdelimit(room, ",", '.');
    double sum_s = 0;
    char *part = room;
    for (int parts = 0; parts < 3; parts++) {
        char *end, *colon = strchr(part, ':');
        size_t length = colon ? (size_t)(colon - part) : strlen(part);
        if (length == 0 || strspn(part, colon ? "0123456789" : "0123456789.") < length) return false;
        double value = g_ascii_strtod(part, &end);
        if (end != part + length || (parts > 0 && value >= 60)) return false;
        sum_s = 60 * sum_s + value;
        if (!colon) {
            *time_s = sum_s;
            return parts > 0;
        }
        part = colon + 1;
    }
    return false;
}

/* A number in the column's unit, or minutes and seconds. *has_minutes: which. */
static bool read_time(const RfTable *table, size_t row, size_t column, double scale, double *time_s,
                      bool *has_minutes, GError **error)
{
    const char *text = rf_table_text(table, row, column);
    *has_minutes = strchr(text, ':') != NULL;
    if (*has_minutes) {
        if (parse_clock(text, time_s)) return true;
        rf_table_cell_error(table, row, column, "a time such as 3.85 or 1:23.4", error);
        return false;
    }
    if (!rf_table_number(table, row, column, time_s, error)) return false;
    *time_s *= scale;
    return true;
}

static bool refuse(const Sheet *sheet, size_t row, int column, const char *needed, GError **error)
{
    rf_table_cell_error(sheet->table, row, (size_t)column, needed, error);
    return false;
}

static bool is_one_of(const char *text, const char *const *words)
{
    for (; *words; words++)
        if (g_ascii_strcasecmp(text, *words) == 0) return true;
    return false;
}

static bool read_motion(const Sheet *sheet, size_t row, RfHandEntry *entry, GError **error)
{
    static const char *const rises[] = {"rise", "rises", "rising", "up", "r", NULL};
    static const char *const falls[] = {"fall", "falls", "falling", "down", "f", NULL};
    const char *text = rf_table_text(sheet->table, row, (size_t)sheet->motion);
    entry->is_rise = is_one_of(text, rises);
    return entry->is_rise || is_one_of(text, falls) ||
           refuse(sheet, row, sheet->motion, "fall or rise", error);
}

static bool is_there(const Sheet *sheet, size_t row, int column)
{
    return column >= 0 && !rf_table_is_blank(sheet->table, row, (size_t)column);
}

/* Negated so that it holds for nothing that isn't a number, too. */
static bool is_outside(double value, double most)
{
    return !(value > 0 && value <= most);
}

static bool read_length(const Sheet *sheet, size_t row, RfHandEntry *entry, GError **error)
{
    if (is_there(sheet, row, sheet->divisions) || sheet->distance < 0) {
        if (!rf_table_number(sheet->table, row, (size_t)sheet->divisions, &entry->divisions, error))
            return false;
        return !is_outside(entry->divisions, most_divisions) ||
               refuse(sheet, row, sheet->divisions, "a number of divisions from above 0 to 1000", error);
    }
    if (!rf_table_number(sheet->table, row, (size_t)sheet->distance, &entry->distance_mm, error))
        return false;
    entry->distance_mm *= sheet->distance_scale;
    return !is_outside(entry->distance_mm, 1e4) ||
           refuse(sheet, row, sheet->distance, "a distance above 0", error);
}

static bool read_interval(const Sheet *sheet, size_t row, RfHandEntry *entry, GError **error)
{
    bool has_minutes;
    g_free(entry->time_text);
    entry->time_text = g_strdup(rf_table_text(sheet->table, row, (size_t)sheet->time));
    if (!read_time(sheet->table, row, (size_t)sheet->time, sheet->time_scale, &entry->time_s, &has_minutes,
                   error))
        return false;
    entry->time_scale = has_minutes ? 0 : sheet->time_scale;
    return !is_outside(entry->time_s, longest_s) || refuse(sheet, row, sheet->time, "a time above 0", error);
}

static bool read_start(const Sheet *sheet, size_t row, RfHandEntry *entry, GError **error)
{
    bool has_minutes;
    entry->has_start = is_there(sheet, row, sheet->start);
    return !entry->has_start || read_time(sheet->table, row, (size_t)sheet->start, sheet->start_scale,
                                          &entry->start_s, &has_minutes, error);
}

static bool read_voltage(const Sheet *sheet, size_t row, RfHandEntry *entry, GError **error)
{
    entry->has_voltage = is_there(sheet, row, sheet->voltage);
    if (!entry->has_voltage) return true;
    if (!rf_table_number(sheet->table, row, (size_t)sheet->voltage, &entry->voltage_V, error)) return false;
    entry->voltage_V *= sheet->voltage_scale;
    return true;
}

static bool read_number(const Sheet *sheet, size_t row, RfHandEntry *entry, GError **error)
{
    guint64 number = row + 1;
    if (is_there(sheet, row, sheet->entry) &&
        !rf_table_whole(sheet->table, row, (size_t)sheet->entry, &number, error))
        return false;
    if (number > G_MAXUINT) return refuse(sheet, row, sheet->entry, "a smaller number", error);
    entry->entry = (unsigned)number;
    return true;
}

static char *label_of(const Sheet *sheet, size_t row)
{
    const char *text = sheet->label >= 0 ? rf_table_text(sheet->table, row, (size_t)sheet->label) : "";
    return g_utf8_strlen(text, -1) > MOST_LABEL ? g_utf8_substring(text, 0, MOST_LABEL) : g_strdup(text);
}

static RfHandEntry read_entry(const Sheet *sheet, size_t row)
{
    RfHandEntry entry = {
        .entry = (unsigned)row + 1, .label = label_of(sheet, row), .time_text = g_strdup("")};
    g_autoptr(GError) error = NULL;
    if (!read_number(sheet, row, &entry, &error) || !read_motion(sheet, row, &entry, &error) ||
        !read_length(sheet, row, &entry, &error) || !read_interval(sheet, row, &entry, &error) ||
        !read_voltage(sheet, row, &entry, &error) || !read_start(sheet, row, &entry, &error))
        entry.problem = g_strdup(error->message);
    return entry;
}

static void entry_clear(void *item)
{
    RfHandEntry *entry = item;
    g_free(entry->label);
    g_free(entry->time_text);
    g_free(entry->problem);
}

static RfHandTimings *timings_of(const RfTable *table, const char *name, GError **error)
{
    Sheet sheet = {.table = table};
    if (!find_columns(&sheet, error)) return NULL;
    if (rf_table_rows(table) == 0) {
        g_set_error(error, RF_TABLE_ERROR, RF_TABLE_ERROR_SHAPE,
                    "%s: a header and no entries; at least one is needed", name);
        return NULL;
    }
    RfHandTimings *timings = g_new0(RfHandTimings, 1);
    timings->entries = g_array_sized_new(FALSE, TRUE, sizeof(RfHandEntry), (guint)rf_table_rows(table));
    g_array_set_clear_func(timings->entries, entry_clear);
    for (size_t row = 0; row < rf_table_rows(table); row++) {
        RfHandEntry entry = read_entry(&sheet, row);
        timings->unreadable += entry.problem != NULL;
        g_array_append_val(timings->entries, entry);
    }
    return timings;
}

RfHandTimings *rf_hand_timings_parse(const char *text, size_t length, const char *name, GError **error)
{
    g_autoptr(RfTable) table = rf_table_parse(text, length, name, error);
    return table ? timings_of(table, name, error) : NULL;
}

RfHandTimings *rf_hand_timings_read(const char *path, GError **error)
{
    g_autoptr(RfTable) table = rf_table_read(path, error);
    return table ? timings_of(table, path, error) : NULL;
}

void rf_hand_timings_free(RfHandTimings *timings)
{
    if (!timings) return;
    g_array_unref(timings->entries);
    g_free(timings);
}
