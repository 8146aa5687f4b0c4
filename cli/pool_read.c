#include "cli/pool_read.h"

#include <string.h>

#include "calib/quantity.h"
#include "calib/table.h"
#include "cli/json_cell.h"

G_DEFINE_QUARK(rf - pool - error, rf_pool_error)

static const double TO_THE_END_S = 1e300;

static bool refuse(GError **error, const char *path, const char *what)
{
    g_set_error(error, RF_POOL_ERROR, RF_POOL_ERROR_FOLDER, "%s: %s", path, what);
    return false;
}

/* ---- summary.json ---- */

/* Element i of the list `name`, or NULL at its end; what isn't an object counts as its end. */
static JsonObject *element(JsonObject *object, const char *name, guint i)
{
    JsonNode *list = json_object_get_member(object, name);
    if (!list || !JSON_NODE_HOLDS_ARRAY(list) || i >= json_array_get_length(json_node_get_array(list)))
        return NULL;
    JsonNode *node = json_array_get_element(json_node_get_array(list), i);
    return JSON_NODE_HOLDS_OBJECT(node) ? json_node_get_object(node) : NULL;
}

static void take_files(JsonObject *summary, RfPoolRecording *recording)
{
    JsonObject *file;
    for (guint i = 0; (file = element(summary, "inputs", i)); i++)
        if (g_strcmp0(rf_json_cell_text(file, "role"), "recording") == 0 && rf_json_cell_text(file, "sha256"))
            g_ptr_array_add(recording->videos, g_strdup(rf_json_cell_text(file, "sha256")));
}

static void take_settings(JsonObject *summary, RfPoolRecording *recording)
{
    JsonObject *setting;
    for (guint i = 0; (setting = element(summary, "settings", i)); i++) {
        const char *group = rf_json_cell_text(setting, "group"), *key = rf_json_cell_text(setting, "key"),
                   *value = rf_json_cell_text(setting, "value");
        RfValue seconds;
        if (!group || !key || !value) continue;
        if (strcmp(group, "analysis") == 0)
            g_ptr_array_add(recording->analysis, g_strdup_printf("%s=%s", key, value));
        if (strcmp(group, "recording") != 0 || !rf_quantity_parse(value, "s", &seconds, NULL)) continue;
        if (strcmp(key, "start") == 0) recording->start_s = seconds.value;
        if (strcmp(key, "stop") == 0) recording->stop_s = seconds.value;
    }
}

static void take_inputs(JsonObject *summary, RfPoolRecording *recording)
{
    JsonObject *one;
    for (guint i = 0; (one = element(summary, "common_inputs", i)) && rf_json_cell_text(one, "input"); i++) {
        const RfPoolInput input = {
            .input = g_strdup(rf_json_cell_text(one, "input")),
            .shared = g_strdup(rf_json_cell_text(one, "shared")),
            .is_law = rf_json_cell_is_true(one, "law"),
            .value = {rf_json_cell_number_or_0(one, "value"), rf_json_cell_number_or_0(one, "u")},
            .unit = g_strdup(rf_json_cell_text(one, "unit") ? rf_json_cell_text(one, "unit") : ""),
        };
        g_array_append_val(recording->inputs, input);
    }
}

static bool read_summary(const char *path, RfPoolRecording *recording, GError **error)
{
    JsonObject *summary;
    g_autoptr(JsonParser) parser = rf_json_cell_load(path, &summary, error);
    if (!parser) return false;
    if (g_strcmp0(rf_json_cell_text(summary, "program"), "risefall") != 0)
        return refuse(error, path,
                      "not the summary of a run; a folder that `risefall run --out` wrote is needed");
    recording->program_version = g_strdup(rf_json_cell_text(summary, "program_version"));
    recording->sheet = g_strdup(rf_json_cell_text(summary, "sheet"));
    recording->verdict = g_strdup(rf_json_cell_text(summary, "verdict"));
    recording->is_measured = rf_json_cell_is_true(summary, "measured");
    take_files(summary, recording);
    take_settings(summary, recording);
    take_inputs(summary, recording);
    if (recording->videos->len == 0) return refuse(error, path, "names no recording among its inputs");
    return true;
}

/* ---- droplets.csv ---- */

static bool number_or_0(const RfTable *table, size_t row, const char *name, double *value, GError **error)
{
    size_t column;
    *value = 0;
    if (!rf_table_require(table, name, &column, error)) return false;
    return rf_table_is_blank(table, row, column) || rf_table_number(table, row, column, value, error);
}

static bool whole_of(const RfTable *table, size_t row, const char *name, unsigned *value, GError **error)
{
    size_t column;
    guint64 number;
    if (!rf_table_require(table, name, &column, error) || !rf_table_whole(table, row, column, &number, error))
        return false;
    *value = (unsigned)MIN(number, G_MAXUINT);
    return true;
}

/* The last two say whether and why; a charge needs its sigma. */
static bool judge(const RfTable *table, size_t row, RfDropletRow *out, GError **error)
{
    size_t verdict, reason, charge;
    if (!rf_table_require(table, "verdict", &verdict, error) ||
        !rf_table_require(table, "reason", &reason, error) ||
        !rf_table_require(table, "charge_C", &charge, error))
        return false;
    out->accepted = strcmp(rf_table_text(table, row, verdict), "accepted") == 0;
    out->has_charge = !rf_table_is_blank(table, row, charge);
    if (out->has_charge && !(out->u_random_C > 0)) {
        rf_table_cell_error(table, row, charge, "beside a charge its u_random_C above 0", error);
        return false;
    }
    out->reason = g_strdup(rf_table_text(table, row, reason));
    return true;
}

static bool add_droplet(const RfTable *table, size_t row, GArray *droplets, GError **error)
{
    RfDropletRow out = {0};
    if (!whole_of(table, row, "droplet", &out.droplet, error) ||
        !whole_of(table, row, "spell", &out.spell, error) ||
        !number_or_0(table, row, "start_s", &out.start_s, error) ||
        !number_or_0(table, row, "end_s", &out.end_s, error) ||
        !number_or_0(table, row, "radius_um", &out.radius_um.value, error) ||
        !number_or_0(table, row, "u_radius_um", &out.radius_um.sigma, error) ||
        !number_or_0(table, row, "charge_C", &out.charge_C.value, error) ||
        !number_or_0(table, row, "u_charge_C", &out.charge_C.sigma, error) ||
        !number_or_0(table, row, "u_random_C", &out.u_random_C, error) || !judge(table, row, &out, error))
        return false;
    out.droplet_there = out.droplet;
    g_array_append_val(droplets, out);
    return true;
}

static bool read_droplets(const char *path, RfPoolRecording *recording, GError **error)
{
    g_autoptr(RfTable) table = rf_table_read(path, error);
    if (!table) return false;
    for (size_t row = 0; row < rf_table_rows(table); row++)
        if (!add_droplet(table, row, recording->droplets, error)) return false;
    return true;
}

/* ---- influences.csv ---- */

static int input_index(const RfPoolRecording *recording, const char *name)
{
    for (guint k = 0; k < recording->inputs->len; k++)
        if (strcmp(g_array_index(recording->inputs, RfPoolInput, k).input, name) == 0) return (int)k;
    return -1;
}

static int droplet_index(const RfPoolRecording *recording, unsigned droplet, unsigned spell, guint hint)
{
    const guint n = recording->droplets->len;
    for (guint step = 0; step < n;
         step++) { /* rows come in the order of droplets: nearly always the first look */
        const guint i = (hint + step) % n;
        const RfDropletRow *row = &g_array_index(recording->droplets, RfDropletRow, i);
        if (row->droplet == droplet && row->spell == spell) return (int)i;
    }
    return -1;
}

static bool read_influence(const RfTable *table, size_t row, RfPoolRecording *recording, guint *at,
                           GError **error)
{
    unsigned droplet, spell;
    size_t input, charge;
    double charge_C;
    if (!whole_of(table, row, "droplet", &droplet, error) || !whole_of(table, row, "spell", &spell, error) ||
        !rf_table_require(table, "input", &input, error) ||
        !rf_table_require(table, "charge_C", &charge, error) ||
        !rf_table_number(table, row, charge, &charge_C, error))
        return false;
    const int k = input_index(recording, rf_table_text(table, row, input));
    const int i = droplet_index(recording, droplet, spell, *at);
    if (k < 0 || i < 0) {
        rf_table_cell_error(table, row, input,
                            k < 0 ? "an input that summary.json names" : "a spell of droplets.csv", error);
        return false;
    }
    *at = (guint)i;
    g_array_index(recording->influences_C, double, (guint)i * recording->inputs->len + (guint)k) = charge_C;
    return true;
}

static bool read_influences(const char *path, RfPoolRecording *recording, GError **error)
{
    guint at = 0;
    g_array_set_size(recording->influences_C, recording->droplets->len * recording->inputs->len);
    g_autoptr(RfTable) table = rf_table_read(path, error);
    if (!table) return false;
    for (size_t row = 0; row < rf_table_rows(table); row++)
        if (!read_influence(table, row, recording, &at, error)) return false;
    return true;
}

/* ---- the folder ---- */

static void input_clear(void *item)
{
    RfPoolInput *input = item;
    g_free(input->input);
    g_free(input->shared);
    g_free(input->unit);
}

static void droplet_clear(void *item)
{
    g_free(((RfDropletRow *)item)->reason);
}

static RfPoolRecording *recording_new(const char *folder)
{
    RfPoolRecording *recording = g_new0(RfPoolRecording, 1);
    recording->folder = g_strdup(folder);
    recording->stop_s = TO_THE_END_S;
    recording->videos = g_ptr_array_new_with_free_func(g_free);
    recording->analysis = g_ptr_array_new_with_free_func(g_free);
    recording->inputs = g_array_new(FALSE, TRUE, sizeof(RfPoolInput));
    g_array_set_clear_func(recording->inputs, input_clear);
    recording->droplets = g_array_new(FALSE, TRUE, sizeof(RfDropletRow));
    g_array_set_clear_func(recording->droplets, droplet_clear);
    recording->influences_C = g_array_new(FALSE, TRUE, sizeof(double));
    return recording;
}

static bool has_file(const char *folder, const char *name)
{
    g_autofree char *path = g_build_filename(folder, name, NULL);
    return g_file_test(path, G_FILE_TEST_EXISTS);
}

static bool is_result_folder(const char *folder, GError **error)
{
    if (!g_file_test(folder, G_FILE_TEST_IS_DIR))
        return refuse(error, folder, "no such folder; one that `risefall run --out` wrote is needed");
    if (!has_file(folder, "summary.json"))
        return refuse(error, folder, "no result of a run: summary.json isn't there");
    if (!has_file(folder, "droplets.csv"))
        return refuse(error, folder,
                      "holds paths only: droplets.csv isn't there; `risefall run` or `charge` makes it");
    if (!has_file(folder, "influences.csv"))
        return refuse(error, folder,
                      "made by an earlier version: influences.csv isn't there; run its sheet again");
    return true;
}

RfPoolRecording *rf_pool_read(const char *folder, GError **error)
{
    if (!is_result_folder(folder, error)) return NULL;
    g_autoptr(RfPoolRecording) recording = recording_new(folder);
    g_autofree char *summary = g_build_filename(folder, "summary.json", NULL),
                    *droplets = g_build_filename(folder, "droplets.csv", NULL),
                    *influences = g_build_filename(folder, "influences.csv", NULL);
    if (!read_summary(summary, recording, error) || !read_droplets(droplets, recording, error) ||
        !read_influences(influences, recording, error))
        return NULL;
    return g_steal_pointer(&recording);
}

void rf_pool_recording_free(RfPoolRecording *recording)
{
    if (!recording) return;
    char *texts[] = {recording->name, recording->folder, recording->sheet, recording->program_version,
                     recording->verdict};
    for (size_t i = 0; i < G_N_ELEMENTS(texts); i++) g_free(texts[i]);
    g_ptr_array_unref(recording->videos);
    g_ptr_array_unref(recording->analysis);
    g_array_unref(recording->inputs);
    g_array_unref(recording->droplets);
    g_array_unref(recording->influences_C);
    g_free(recording);
}
