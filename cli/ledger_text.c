#include "cli/ledger_text.h"

#include <inttypes.h>
#include <math.h>

#include "cli/csv_text.h"
#include "cli/json_text.h"
#include "cli/text_number.h"

/* ---- on the screen ---- */

static char *figure_text(const RfLedgerEntry *entry, const char *name, int exponent)
{
    const RfLedgerFigure *figure = rf_ledger_entry_figure(entry, name);
    return figure ? rf_text_number_concise_scaled(figure->value, exponent) : g_strdup("-");
}

/* "…/bench-a/tuesday": the end says most. */
static void append_end(GString *out, const char *text, glong width)
{
    const glong length = g_utf8_strlen(text, -1);
    if (length <= width)
        g_string_append(out, text);
    else
        g_string_append_printf(out, "…%s", g_utf8_offset_to_pointer(text, length - width + 1));
}

char *rf_ledger_text_list(const GPtrArray *entries)
{
    if (entries->len == 0) return g_strdup("no entries\n");
    GString *out = g_string_new("number  kind   measured    unit, 1e-19 C   scale, px/mm  results\n");
    for (guint i = 0; i < entries->len; i++) {
        const RfLedgerEntry *entry = g_ptr_array_index(entries, i);
        g_autofree char *unit = figure_text(entry, "unit_charge_C", -19),
                        *scale = figure_text(entry, "scale_px_mm", 0);
        g_string_append_printf(out, "%6" PRId64 "  %-5s  %-10.10s  %14s  %13s  ", entry->number, entry->kind,
                               entry->measured_on, unit, scale);
        g_autofree char *folder = g_utf8_make_valid(entry->folder ? entry->folder : "(none written)", -1);
        append_end(out, folder, 24);
        g_string_append_c(out, '\n');
    }
    return g_string_free(out, FALSE);
}

static void line(GString *out, const char *name, const char *text)
{
    if (!text || !*text) return;
    g_autofree char *valid = g_utf8_make_valid(text, -1);
    g_string_append_printf(out, "%-12s  %s\n", name, valid);
}

static void append_inputs(GString *out, const GArray *inputs)
{
    if (inputs->len) g_string_append(out, "\nWhat went in\n");
    for (guint i = 0; i < inputs->len; i++) {
        const RfInputFile *input = &g_array_index(inputs, RfInputFile, i);
        g_autofree char *path = g_utf8_make_valid(input->path, -1);
        g_string_append_printf(out, "  %-13s %.12s  %s\n", input->role, input->sha256, path);
    }
}

static void append_settings(GString *out, const GArray *settings)
{
    if (settings->len) g_string_append(out, "\nHow it was set\n");
    for (guint i = 0; i < settings->len; i++) {
        const RfUsedSetting *setting = &g_array_index(settings, RfUsedSetting, i);
        g_autofree char *name = g_strdup_printf("[%s] %s", setting->group, setting->key);
        g_autofree char *text =
            g_strdup_printf("  %-26s %s%s", name, setting->value, setting->is_default ? "  (default)" : "");
        g_autofree char *valid = g_utf8_make_valid(text, -1);
        g_string_append_printf(out, "%s\n", valid);
    }
}

static void append_figures(GString *out, const GArray *figures)
{
    if (figures->len) g_string_append(out, "\nFigures\n");
    for (guint i = 0; i < figures->len; i++) {
        const RfLedgerFigure *figure = &g_array_index(figures, RfLedgerFigure, i);
        const bool is_charge = g_str_has_suffix(figure->name, "_C");
        g_autofree char *value = rf_text_number_concise_scaled(figure->value, is_charge ? -19 : 0);
        g_string_append_printf(out, "  %-18s %14s%s\n", figure->name, value, is_charge ? "e-19" : "");
    }
}

static void append_remarks(GString *out, const GArray *remarks)
{
    if (remarks->len) g_string_append(out, "\nRemarks\n");
    for (guint i = 0; i < remarks->len; i++) {
        const RfLedgerRemark *remark = &g_array_index(remarks, RfLedgerRemark, i);
        g_autofree char *text = g_utf8_make_valid(remark->text, -1);
        g_string_append_printf(out, "  %s: %s\n", remark->kind, text);
    }
}

char *rf_ledger_text_entry(const RfLedgerEntry *entry)
{
    GString *out = g_string_new(NULL);
    g_string_append_printf(out, "%-12s  %" PRId64 ", a %s\n", "entry", entry->number, entry->kind);
    line(out, "measured", entry->measured_on);
    line(out, "entered", entry->entered);
    line(out, "risefall", entry->version);
    line(out, "sheet", entry->sheet);
    line(out, "results", entry->folder);
    line(out, "verdict", entry->verdict);
    append_figures(out, entry->figures);
    append_remarks(out, entry->remarks);
    append_inputs(out, entry->inputs);
    append_settings(out, entry->settings);
    return g_string_free(out, FALSE);
}

/* ---- for scripts ---- */

static int by_name(gconstpointer a, gconstpointer b)
{
    return g_strcmp0(*(char *const *)a, *(char *const *)b);
}

static GPtrArray *figure_names(const GPtrArray *entries)
{
    g_autoptr(GHashTable) seen = g_hash_table_new(g_str_hash, g_str_equal);
    GPtrArray *names = g_ptr_array_new();
    for (guint i = 0; i < entries->len; i++) {
        const GArray *figures = ((const RfLedgerEntry *)g_ptr_array_index(entries, i))->figures;
        for (guint j = 0; j < figures->len; j++) {
            char *name = g_array_index(figures, RfLedgerFigure, j).name;
            if (g_hash_table_add(seen, name)) g_ptr_array_add(names, name);
        }
    }
    g_ptr_array_sort(names, by_name);
    return names;
}

static void append_number(GString *out, double value)
{
    char text[G_ASCII_DTOSTR_BUF_SIZE];
    g_string_append(out, g_ascii_formatd(text, sizeof text, "%.12g", value));
}

char *rf_ledger_text_csv(const GPtrArray *entries)
{
    g_autoptr(GPtrArray) names = figure_names(entries);
    GString *out = g_string_new("number,kind,measured_on,entered,version,measured,sheet,results,verdict");
    for (guint i = 0; i < names->len; i++)
        g_string_append_printf(out, ",%s,u_%s", (char *)names->pdata[i], (char *)names->pdata[i]);
    g_string_append_c(out, '\n');
    for (guint i = 0; i < entries->len; i++) {
        const RfLedgerEntry *entry = g_ptr_array_index(entries, i);
        g_string_append_printf(out, "%" PRId64 ",%s,%s,%s,%s,%d,", entry->number, entry->kind,
                               entry->measured_on, entry->entered, entry->version, entry->measured);
        rf_csv_text_append(out, entry->sheet);
        rf_csv_text_append(out, entry->folder);
        rf_csv_text_append(out, entry->verdict);
        for (guint j = 0; j < names->len; j++) {
            const RfLedgerFigure *figure = rf_ledger_entry_figure(entry, names->pdata[j]);
            if (figure) append_number(out, figure->value.value);
            g_string_append_c(out, ',');
            if (figure) append_number(out, figure->value.sigma);
            g_string_append_c(out, ',');
        }
        out->str[out->len - 1] = '\n';
    }
    return g_string_free(out, FALSE);
}

static void begin(JsonBuilder *json, const char *key)
{
    json_builder_set_member_name(json, key);
    json_builder_begin_array(json);
}

static void add_inputs(JsonBuilder *json, const GArray *inputs)
{
    begin(json, "inputs");
    for (guint i = 0; i < inputs->len; i++) {
        const RfInputFile *input = &g_array_index(inputs, RfInputFile, i);
        json_builder_begin_object(json);
        rf_json_text_words(json, "role", input->role);
        rf_json_text_words(json, "path", input->path);
        rf_json_text_words(json, "sha256", input->sha256);
        json_builder_end_object(json);
    }
    json_builder_end_array(json);
}

static void add_settings(JsonBuilder *json, const GArray *settings)
{
    begin(json, "settings");
    for (guint i = 0; i < settings->len; i++) {
        const RfUsedSetting *setting = &g_array_index(settings, RfUsedSetting, i);
        json_builder_begin_object(json);
        rf_json_text_words(json, "group", setting->group);
        rf_json_text_words(json, "key", setting->key);
        rf_json_text_words(json, "value", setting->value);
        rf_json_text_truth(json, "default", setting->is_default);
        json_builder_end_object(json);
    }
    json_builder_end_array(json);
}

static void add_figures(JsonBuilder *json, const GArray *figures)
{
    json_builder_set_member_name(json, "figures");
    json_builder_begin_object(json);
    for (guint i = 0; i < figures->len; i++) {
        const RfLedgerFigure *figure = &g_array_index(figures, RfLedgerFigure, i);
        g_autofree char *u_name = g_strconcat("u_", figure->name, NULL);
        rf_json_text_number(json, figure->name, figure->value.value);
        rf_json_text_number(json, u_name, figure->value.sigma);
    }
    json_builder_end_object(json);
}

static void add_remarks(JsonBuilder *json, const GArray *remarks)
{
    begin(json, "remarks");
    for (guint i = 0; i < remarks->len; i++) {
        const RfLedgerRemark *remark = &g_array_index(remarks, RfLedgerRemark, i);
        json_builder_begin_object(json);
        rf_json_text_words(json, "kind", remark->kind);
        rf_json_text_words(json, "text", remark->text);
        json_builder_end_object(json);
    }
    json_builder_end_array(json);
}

char *rf_ledger_text_json(const GPtrArray *entries)
{
    g_autoptr(JsonBuilder) json = json_builder_new_immutable();
    json_builder_begin_array(json);
    for (guint i = 0; i < entries->len; i++) {
        const RfLedgerEntry *entry = g_ptr_array_index(entries, i);
        json_builder_begin_object(json);
        rf_json_text_whole(json, "number", entry->number);
        rf_json_text_words(json, "kind", entry->kind);
        rf_json_text_words(json, "measured_on", entry->measured_on);
        rf_json_text_words(json, "entered", entry->entered);
        rf_json_text_words(json, "version", entry->version);
        rf_json_text_truth(json, "measured", entry->measured);
        rf_json_text_words(json, "sheet", entry->sheet);
        rf_json_text_words(json, "results", entry->folder);
        rf_json_text_words(json, "verdict", entry->verdict);
        add_figures(json, entry->figures);
        add_remarks(json, entry->remarks);
        add_inputs(json, entry->inputs);
        add_settings(json, entry->settings);
        json_builder_end_object(json);
    }
    json_builder_end_array(json);
    return rf_json_text_finish(json);
}
