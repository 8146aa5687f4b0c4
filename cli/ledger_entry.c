#include "cli/ledger_entry.h"

#include "cli/version.h"

#include <math.h>

static void figure_clear(void *item)
{
    g_free(((RfLedgerFigure *)item)->name);
}

static void remark_clear(void *item)
{
    g_free(((RfLedgerRemark *)item)->kind);
    g_free(((RfLedgerRemark *)item)->text);
}

static GArray *rows(size_t size, GDestroyNotify clear)
{
    GArray *array = g_array_new(FALSE, TRUE, (guint)size);
    g_array_set_clear_func(array, clear);
    return array;
}

RfLedgerEntry *rf_ledger_entry_new(const char *kind)
{
    g_autoptr(GDateTime) now = g_date_time_new_now_utc();
    RfLedgerEntry *entry = g_new0(RfLedgerEntry, 1);
    entry->kind = g_strdup(kind);
    entry->entered = g_date_time_format(now, "%Y-%m-%dT%H:%M:%SZ");
    entry->measured_on = g_date_time_format(now, "%Y-%m-%d");
    entry->version = g_strdup(RF_VERSION);
    entry->inputs = rf_results_inputs_new();
    entry->settings = rf_results_settings_new();
    entry->figures = rows(sizeof(RfLedgerFigure), figure_clear);
    entry->remarks = rows(sizeof(RfLedgerRemark), remark_clear);
    return entry;
}

void rf_ledger_entry_add_input(RfLedgerEntry *entry, const char *role, const char *path, const char *sha256)
{
    RfInputFile input = {g_strdup(role), g_canonicalize_filename(path, NULL), g_strdup(sha256)};
    g_array_append_val(entry->inputs, input);
}

void rf_ledger_entry_add_setting(RfLedgerEntry *entry, const char *group, const char *key, const char *value,
                                 bool is_default)
{
    RfUsedSetting setting = {g_strdup(group), g_strdup(key), g_strdup(value), is_default, NULL};
    g_array_append_val(entry->settings, setting);
}

void rf_ledger_entry_add_figure(RfLedgerEntry *entry, const char *name, RfValue value)
{
    RfLedgerFigure figure = {g_strdup(name), value};
    g_array_append_val(entry->figures, figure);
}

void rf_ledger_entry_add_remark(RfLedgerEntry *entry, const char *kind, const char *text)
{
    RfLedgerRemark remark = {g_strdup(kind), g_strdup(text)};
    g_array_append_val(entry->remarks, remark);
}

const RfLedgerFigure *rf_ledger_entry_figure(const RfLedgerEntry *entry, const char *name)
{
    for (guint i = 0; i < entry->figures->len; i++) {
        const RfLedgerFigure *figure = &g_array_index(entry->figures, RfLedgerFigure, i);
        if (g_str_equal(figure->name, name)) return figure;
    }
    return NULL;
}

const char *rf_ledger_entry_note(const RfLedgerEntry *entry, const char *key)
{
    for (guint i = 0; i < entry->settings->len; i++) {
        const RfUsedSetting *setting = &g_array_index(entry->settings, RfUsedSetting, i);
        if (g_str_equal(setting->group, "notes") && g_str_equal(setting->key, key)) return setting->value;
    }
    return NULL;
}

/* ---- figures worth following ---- */

static int compare_doubles(const void *a, const void *b)
{
    const double x = *(const double *)a, y = *(const double *)b;
    return (x > y) - (x < y);
}

/* The error of seeing a droplet along gravity's picture axis: the median over all measured positions. */
static void add_noise(RfLedgerEntry *entry, const GArray *paths)
{
    g_autoptr(GArray) noises = g_array_sized_new(FALSE, FALSE, sizeof(double), paths->len);
    for (guint i = 0; i < paths->len; i++) {
        const RfPathRow *row = &g_array_index(paths, RfPathRow, i);
        if (row->seen) g_array_append_val(noises, row->u_y_px);
    }
    if (noises->len == 0) return;
    g_array_sort(noises, compare_doubles);
    rf_ledger_entry_add_figure(entry, "noise_px",
                               (RfValue){g_array_index(noises, double, noises->len / 2), 0});
}

/* What the air did to all droplets: the weighted mean of the segments' drift across gravity. */
static void add_drift(RfLedgerEntry *entry, const GArray *segments)
{
    double weights = 0, sum = 0;
    for (guint i = 0; i < segments->len; i++) {
        const RfValue *drift = &g_array_index(segments, RfSegmentRow, i).drift_mm_s;
        if (!(drift->sigma > 0)) continue;
        const double weight = 1 / (drift->sigma * drift->sigma);
        weights += weight;
        sum += weight * drift->value;
    }
    if (weights > 0)
        rf_ledger_entry_add_figure(entry, "drift_mm_s", (RfValue){sum / weights, 1 / sqrt(weights)});
}

static void add_bench_figures(RfLedgerEntry *entry, const RfResults *results)
{
    const RfScaleRow *scale = &results->scale;
    if (results->unit.resolved) rf_ledger_entry_add_figure(entry, "unit_charge_C", results->unit.unit_C);
    if (scale->found)
        rf_ledger_entry_add_figure(entry, "scale_px_mm", (RfValue){scale->px_per_mm_y, scale->u_px_per_mm_y});
    add_noise(entry, results->paths);
    add_drift(entry, results->segments);
    if (results->air_temperature_kelvin.value > 0)
        rf_ledger_entry_add_figure(
            entry, "temperature_degC",
            (RfValue){results->air_temperature_kelvin.value - 273.15, results->air_temperature_kelvin.sigma});
}

/* An audit tells of the person alone: what it read of the bench has been entered with its run. */
static void add_figures(RfLedgerEntry *entry, const RfResults *results)
{
    if (!g_str_equal(entry->kind, "audit")) add_bench_figures(entry, results);
    if (results->person.is_known) rf_ledger_entry_add_figure(entry, "timing_bias_s", results->person.bias_s);
}

static void add_findings(RfLedgerEntry *entry, const GArray *audit)
{
    for (guint i = 0; i < audit->len; i++) {
        const RfAuditRow *row = &g_array_index(audit, RfAuditRow, i);
        g_autofree char *text = g_strdup_printf("entry %u: %s", row->entry, row->finding);
        rf_ledger_entry_add_remark(entry, "finding", text);
    }
}

static void take_date(RfLedgerEntry *entry)
{
    const char *date = rf_ledger_entry_note(entry, "date");
    if (!date || !g_regex_match_simple("^\\d{4}-\\d{2}-\\d{2}(?!\\d)", date, 0, 0)) return;
    GDate day;
    g_date_clear(&day, 1);
    const guint year = (guint)g_ascii_strtoull(date, NULL, 10),
                month = (guint)g_ascii_strtoull(date + 5, NULL, 10),
                of_month = (guint)g_ascii_strtoull(date + 8, NULL, 10);
    if (!g_date_valid_dmy((GDateDay)of_month, (GDateMonth)month, (GDateYear)year)) return;
    g_free(entry->measured_on);
    entry->measured_on = g_strdup(date);
}

RfLedgerEntry *rf_ledger_entry_from_results(const char *kind, const RfResults *results, const char *folder)
{
    RfLedgerEntry *entry = rf_ledger_entry_new(kind);
    entry->sheet = results->sheet_path ? g_canonicalize_filename(results->sheet_path, NULL) : NULL;
    entry->folder = folder ? g_canonicalize_filename(folder, NULL) : NULL;
    entry->measured = results->measured;
    entry->verdict = g_strdup(results->verdict);
    for (guint i = 0; i < results->inputs->len; i++) {
        const RfInputFile *input = &g_array_index(results->inputs, RfInputFile, i);
        rf_ledger_entry_add_input(entry, input->role, input->path, input->sha256);
    }
    const GArray *lists[] = {results->settings, results->notes};
    for (size_t k = 0; k < G_N_ELEMENTS(lists); k++)
        for (guint i = 0; i < lists[k]->len; i++) {
            const RfUsedSetting *row = &g_array_index(lists[k], RfUsedSetting, i);
            rf_ledger_entry_add_setting(entry, row->group, row->key, row->value, row->is_default);
        }
    add_figures(entry, results);
    for (guint i = 0; i < results->warnings->len; i++)
        rf_ledger_entry_add_remark(entry, "warning", g_ptr_array_index(results->warnings, i));
    add_findings(entry, results->audit);
    take_date(entry);
    return entry;
}

void rf_ledger_entry_free(RfLedgerEntry *entry)
{
    if (!entry) return;
    GArray *arrays[] = {entry->inputs, entry->settings, entry->figures, entry->remarks};
    for (size_t i = 0; i < G_N_ELEMENTS(arrays); i++) g_array_unref(arrays[i]);
    char *texts[] = {entry->kind,  entry->entered, entry->measured_on, entry->version,
                     entry->sheet, entry->folder,  entry->verdict};
    for (size_t i = 0; i < G_N_ELEMENTS(texts); i++) g_free(texts[i]);
    g_free(entry);
}
