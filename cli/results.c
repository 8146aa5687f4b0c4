#include "cli/results.h"

static void setting_clear(void *item)
{
    RfUsedSetting *setting = item;
    g_free(setting->group);
    g_free(setting->key);
    g_free(setting->value);
    g_free(setting->remark);
}

static void input_clear(void *item)
{
    RfInputFile *input = item;
    g_free(input->role);
    g_free(input->path);
    g_free(input->sha256);
}

static void droplet_clear(void *item)
{
    g_free(((RfDropletRow *)item)->reason);
}

static void budget_clear(void *item)
{
    RfBudgetRow *row = item;
    g_free(row->input);
    g_free(row->stated);
}

static void recording_clear(void *item)
{
    RfRecordingRow *row = item;
    g_free(row->name);
    g_free(row->sheet);
    g_free(row->reason);
}

static void measurement_clear(void *item)
{
    RfMeasurementRow *row = item;
    g_free(row->input);
    g_free(row->name);
}

static void common_clear(void *item)
{
    g_free(((RfCommonRow *)item)->shared);
}

static void audit_clear(void *item)
{
    RfAuditRow *row = item;
    g_free(row->label);
    g_free(row->evidence);
}

static void hand_charge_clear(void *item)
{
    g_free(((RfHandChargeRow *)item)->label);
}

static void effect_clear(void *item)
{
    RfEffectRow *row = item;
    g_free(row->effect);
    g_free(row->size);
    g_free(row->done);
}

static void review_clear(void *item)
{
    RfReviewRow *row = item;
    g_free(row->reason);
    g_free(row->name);
    g_free(row->date);
    g_free(row->detail);
}

static GArray *rows(size_t size, GDestroyNotify clear)
{
    GArray *array = g_array_new(FALSE, TRUE, (guint)size);
    if (clear) g_array_set_clear_func(array, clear);
    return array;
}

GArray *rf_results_inputs_new(void)
{
    return rows(sizeof(RfInputFile), input_clear);
}

GArray *rf_results_settings_new(void)
{
    return rows(sizeof(RfUsedSetting), setting_clear);
}

RfResults *rf_results_new(void)
{
    RfResults *results = g_new0(RfResults, 1);
    results->inputs = rf_results_inputs_new();
    results->settings = rf_results_settings_new();
    results->notes = rf_results_settings_new();
    results->warnings = g_ptr_array_new_with_free_func(g_free);
    results->cuts = g_ptr_array_new_with_free_func(g_free);
    results->pixel_aspect = 1;
    results->paths = rows(sizeof(RfPathRow), NULL);
    results->segments = rows(sizeof(RfSegmentRow), NULL);
    results->switches = rows(sizeof(RfSwitchRow), NULL);
    results->steps = rows(sizeof(RfStepRow), NULL);
    results->droplets = rows(sizeof(RfDropletRow), droplet_clear);
    results->budget = rows(sizeof(RfBudgetRow), budget_clear);
    results->common = rows(sizeof(RfCommonRow), common_clear);
    results->recordings = rows(sizeof(RfRecordingRow), recording_clear);
    results->measurements = rows(sizeof(RfMeasurementRow), measurement_clear);
    results->influences = rows(sizeof(RfInfluenceRow), NULL);
    results->audit = rows(sizeof(RfAuditRow), audit_clear);
    results->hand_charges = rows(sizeof(RfHandChargeRow), hand_charge_clear);
    results->effects = rows(sizeof(RfEffectRow), effect_clear);
    results->certificate = rows(sizeof(RfCertificateRow), NULL);
    results->review = rows(sizeof(RfReviewRow), review_clear);
    results->unit.curve_unit_C = rows(sizeof(double), NULL);
    results->unit.curve_log_likelihood = rows(sizeof(double), NULL);
    return results;
}

/* The caller may have put other arrays, or none, in place of those that new made. */
static void free_array(GArray *array)
{
    if (array) g_array_unref(array);
}

void rf_results_free(RfResults *results)
{
    if (!results) return;
    GArray *arrays[] = {results->inputs,
                        results->settings,
                        results->notes,
                        results->paths,
                        results->segments,
                        results->switches,
                        results->steps,
                        results->droplets,
                        results->budget,
                        results->audit,
                        results->unit.curve_unit_C,
                        results->unit.curve_log_likelihood,
                        results->hand_charges,
                        results->effects,
                        results->certificate,
                        results->fitness,
                        results->common,
                        results->influences,
                        results->recordings,
                        results->measurements,
                        results->review};
    for (size_t i = 0; i < G_N_ELEMENTS(arrays); i++) free_array(arrays[i]);
    rf_results_free(results->without);
    if (results->warnings) g_ptr_array_unref(results->warnings);
    if (results->cuts) g_ptr_array_unref(results->cuts);
    if (results->view_png) g_bytes_unref(results->view_png);
    rf_preview_free(results->preview);
    g_free(results->sheet_path);
    g_free(results->recording_summary);
    g_free(results->scale.source);
    g_free(results->unit.reason);
    g_free(results->verdict);
    g_free(results);
}

void rf_results_warn(RfResults *results, const char *format, ...)
{
    va_list arguments;
    va_start(arguments, format);
    g_ptr_array_add(results->warnings, g_strdup_vprintf(format, arguments));
    va_end(arguments);
}
