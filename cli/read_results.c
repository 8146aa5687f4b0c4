#include "cli/read_results.h"

#include "calib/table.h"
#include "cli/conditions.h"
#include "cli/json_cell.h"
#include "cli/read_paths.h"
#include "cli/settings.h"

#include <math.h>
#include <string.h>

/* ---- tables ---- */

/* A number, or 0 where the cell is blank. */
static bool number_or_0(const RfTable *table, size_t row, const char *name, double *value, GError **error)
{
    size_t column;
    *value = 0;
    if (!rf_table_require(table, name, &column, error)) return false;
    return rf_table_is_blank(table, row, column) || rf_table_number(table, row, column, value, error);
}

static bool state_of(const RfTable *table, size_t row, const char *name, RfFieldState *state, GError **error)
{
    size_t column;
    if (!rf_table_require(table, name, &column, error)) return false;
    const char *text = rf_table_text(table, row, column);
    if (g_str_equal(text, "off"))
        *state = RF_FIELD_OFF;
    else if (g_str_equal(text, "top+"))
        *state = RF_FIELD_TOP_PLUS;
    else if (g_str_equal(text, "top-"))
        *state = RF_FIELD_TOP_MINUS;
    else {
        rf_table_cell_error(table, row, column, "off, top+ or top-", error);
        return false;
    }
    return true;
}

static bool add_switch(const RfTable *table, size_t row, RfResults *results, GError **error)
{
    RfSwitchRow out = {.number = (unsigned)row + 1};
    if (!number_or_0(table, row, "time_s", &out.time_s.value, error) ||
        !number_or_0(table, row, "u_time_s", &out.time_s.sigma, error) ||
        !state_of(table, row, "from", &out.from, error) || !state_of(table, row, "to", &out.to, error))
        return false;
    g_array_append_val(results->switches, out);
    return true;
}

static bool droplet_number(const RfTable *table, size_t row, unsigned *droplet, GError **error)
{
    guint64 number;
    size_t column;
    if (!rf_table_require(table, "droplet", &column, error) ||
        !rf_table_whole(table, row, column, &number, error))
        return false;
    *droplet = (unsigned)MIN(number, G_MAXUINT);
    return true;
}

static bool add_droplet(const RfTable *table, size_t row, RfResults *results, GError **error)
{
    RfDropletRow out = {0};
    double spell;
    if (!droplet_number(table, row, &out.droplet, error) ||
        !number_or_0(table, row, "start_s", &out.start_s, error) ||
        !number_or_0(table, row, "end_s", &out.end_s, error) ||
        !number_or_0(table, row, "spell", &spell, error) ||
        !number_or_0(table, row, "charge_C", &out.charge_C.value, error) ||
        !number_or_0(table, row, "u_charge_C", &out.charge_C.sigma, error))
        return false;
    out.spell = (unsigned)fmax(0, fmin(spell, 1e9));
    out.has_charge = out.charge_C.sigma > 0;
    out.reason = g_strdup("");
    g_array_append_val(results->droplets, out);
    return true;
}

typedef struct {
    const char *name;
    bool is_needed;
    bool (*add)(const RfTable *table, size_t row, RfResults *results, GError **error);
} Part;

static bool read_part(const char *folder, const Part *part, RfResults *results, GError **error)
{
    g_autofree char *path = g_build_filename(folder, part->name, NULL);
    if (!part->is_needed && !g_file_test(path, G_FILE_TEST_EXISTS)) {
        g_ptr_array_add(results->warnings,
                        g_strdup_printf("%s isn't there: charges can't be compared", path));
        return true;
    }
    g_autoptr(RfTable) table = rf_table_read(path, error);
    if (!table) return false;
    for (size_t row = 0; row < rf_table_rows(table); row++)
        if (!part->add(table, row, results, error)) return false;
    return true;
}

/* ---- summary.json ---- */

/* The sheet as it was in force, written out again. (returns new) */
static char *sheet_text(JsonArray *settings)
{
    g_autoptr(GKeyFile) sheet = g_key_file_new();
    for (guint i = 0; i < json_array_get_length(settings); i++) {
        JsonNode *node = json_array_get_element(settings, i);
        JsonObject *one = JSON_NODE_HOLDS_OBJECT(node) ? json_node_get_object(node) : NULL;
        const char *group = one ? rf_json_cell_text(one, "group") : NULL,
                   *key = one ? rf_json_cell_text(one, "key") : NULL;
        const char *value = one ? rf_json_cell_text(one, "value") : NULL;
        bool is_default = one && rf_json_cell_is_true(one, "default");
        if (group && key && value && !is_default) g_key_file_set_string(sheet, group, key, value);
    }
    return g_key_file_to_data(sheet, NULL, NULL);
}

static bool medium_of(JsonObject *summary, const char *summary_path, RfMedium *medium, GError **error)
{
    JsonNode *node = json_object_get_member(summary, "settings");
    if (!node || !JSON_NODE_HOLDS_ARRAY(node)) {
        g_set_error(error, RF_TABLE_ERROR, RF_TABLE_ERROR_FILE, "%s: no settings in it", summary_path);
        return false;
    }
    g_autofree char *text = sheet_text(json_node_get_array(node));
    const char *path = rf_json_cell_text(summary, "sheet");
    g_autoptr(RfSettings) settings = rf_settings_parse(text, strlen(text), path ? path : "sheet", error);
    if (!settings) return false;
    const RfChargeInputs inputs = rf_conditions_of(settings, 0);
    *medium = rf_charge_budget_medium(&inputs);
    return true;
}

static void take_recording(JsonObject *summary, RfResults *results)
{
    JsonNode *node = json_object_get_member(summary, "recording");
    results->sheet_path = g_strdup(rf_json_cell_text(summary, "sheet"));
    if (!node || !JSON_NODE_HOLDS_OBJECT(node)) return;
    JsonObject *recording = json_node_get_object(node);
    results->recording_summary = g_strdup(rf_json_cell_text(recording, "summary"));
    results->gravity_axis_deg = rf_json_cell_number_or_0(recording, "gravity_axis_deg");
    results->duration_s = rf_json_cell_number_or_0(recording, "duration_s");
}

/* Every setting of one of summary.json's lists. */
static void take_settings(JsonObject *summary, const char *name, GArray *rows)
{
    JsonNode *node = json_object_get_member(summary, name);
    if (!node || !JSON_NODE_HOLDS_ARRAY(node)) return;
    JsonArray *list = json_node_get_array(node);
    for (guint i = 0; i < json_array_get_length(list); i++) {
        JsonNode *item = json_array_get_element(list, i);
        if (!JSON_NODE_HOLDS_OBJECT(item)) continue;
        JsonObject *one = json_node_get_object(item);
        const char *group = rf_json_cell_text(one, "group"), *key = rf_json_cell_text(one, "key"),
                   *value = rf_json_cell_text(one, "value");
        if (!group || !key || !value) continue;
        RfUsedSetting row = {g_strdup(group), g_strdup(key), g_strdup(value),
                             rf_json_cell_is_true(one, "default"),
                             g_strdup(rf_json_cell_text(one, "remark"))};
        g_array_append_val(rows, row);
    }
}

static void read_summary(const char *folder, RfResults *results, RfMedium *medium, bool *has_medium)
{
    g_autofree char *path = g_build_filename(folder, "summary.json", NULL);
    g_autoptr(GError) error = NULL;
    JsonObject *summary;
    g_autoptr(JsonParser) parser = rf_json_cell_load(path, &summary, &error);
    if (parser) {
        take_recording(summary, results);
        take_settings(summary, "settings", results->settings);
        take_settings(summary, "notes", results->notes);
    }
    *has_medium = parser && medium_of(summary, path, medium, &error);
    if (!*has_medium) rf_results_warn(results, "%s; no charges from hand timings", error->message);
}

RfResults *rf_read_results(const char *folder, RfMedium *medium, bool *has_medium, GError **error)
{
    static const Part parts[] = {{"switches.csv", true, add_switch}, {"droplets.csv", false, add_droplet}};
    g_autoptr(RfResults) results = rf_results_new();
    g_autofree char *paths = g_build_filename(folder, "paths.csv", NULL);
    double scale_relative_u;
    if (!rf_read_paths(paths, results, &scale_relative_u, error)) return NULL;
    for (size_t i = 0; i < G_N_ELEMENTS(parts); i++)
        if (!read_part(folder, &parts[i], results, error)) return NULL;
    read_summary(folder, results, medium, has_medium);
    return g_steal_pointer(&results);
}
