#include "cli/write_pool.h"

#include "cli/figure.h"
#include "cli/report_html.h"
#include "cli/tally.h"
#include "cli/text_number.h"
#include "cli/write_csv.h"
#include "cli/write_json.h"

enum { MOST_LISTED = 12 };

typedef struct {
    const char *name;
    GString *(*write)(const RfResults *results);
} Table;

static const Table TABLES[] = {
    {"recordings.csv", rf_write_csv_recordings},
    {"droplets.csv", rf_write_csv_pooled_droplets},
    {"measurements.csv", rf_write_csv_measurements},
};

bool rf_write_pool(RfResults *results, RfResultFolder *folder, GError **error)
{
    for (size_t i = 0; i < G_N_ELEMENTS(TABLES); i++) {
        g_autoptr(GString) text = TABLES[i].write(results);
        if (!rf_result_folder_add(folder, TABLES[i].name, text->str, text->len, error)) return false;
    }
    /* Before the report: whether gnuplot is installed must not change a byte of the JSON. */
    g_autofree char *json = rf_write_json_pool(results);
    if (!rf_result_folder_add_text(folder, "pool.json", json, error)) return false;
    g_autoptr(RfFigureSet) figures = rf_figure_draw(results, folder, error);
    if (!figures) return false;
    if (figures->warning) g_ptr_array_add(results->warnings, g_strdup(figures->warning));
    g_autoptr(GString) page = rf_report_html_pool_new(results, figures);
    return rf_result_folder_add(folder, "report.html", page->str, page->len, error);
}

/* ---- for the screen ---- */

static void unit(GString *out, const RfUnitResult *found)
{
    if (!found->resolved) {
        g_string_append_printf(out, "unit of charge   not resolved: %s\n", found->reason);
        return;
    }
    g_autofree char *value = rf_text_number_concise_scaled(found->unit_C, -19);
    g_autofree char *droplets =
        rf_text_number_concise_scaled((RfValue){found->unit_C.value, found->u_random_C}, -19);
    g_string_append_printf(out, "unit of charge   %se-19 C, droplets' own part %s\n", value, droplets);
}

static void counts(GString *out, const RfResults *results)
{
    const RfTally tally = rf_tally_droplets(results);
    const unsigned failed = rf_tally_recordings(results, RF_RECORDING_FAILED),
                   pooled = rf_tally_recordings(results, RF_RECORDING_POOLED);
    g_string_append_printf(out, "recordings       %u pooled, %u that tell nothing, %u without a result\n",
                           pooled, results->recordings->len - pooled - failed, failed);
    g_string_append_printf(out, "droplets         %u accepted, %u set aside\n", tally.droplets_accepted,
                           tally.droplets - tally.droplets_accepted);
    const RfBudgetRow *limit = rf_tally_limiting_input(results);
    if (!limit) return;
    g_string_append_printf(out, "limited by       %s: ", limit->input);
    rf_text_number_append_fixed(out, 100 * limit->charge_relative_u, 2);
    g_string_append(out, " % of the unit\n");
}

static void agreement(GString *out, const RfResults *results)
{
    const RfAgreementOfRecordings *found = &results->agreement;
    if (found->used < 2) return;
    const RfRecordingRow *row = &g_array_index(results->recordings, RfRecordingRow, found->most_off);
    g_string_append_printf(
        out, "agreement        chi-squared %.1f for %u (p = %.2g); most off: %s, %+.1f u (p = %.2g)\n",
        found->chi_squared, found->used - 1, found->p, row->name, row->deviate, found->most_off_p);
}

static void absent(GString *out, const RfResults *results)
{
    unsigned listed = 0;
    for (guint i = 0; i < results->recordings->len; i++) {
        const RfRecordingRow *row = &g_array_index(results->recordings, RfRecordingRow, i);
        if (row->state == RF_RECORDING_POOLED) continue;
        if (++listed <= MOST_LISTED)
            g_string_append_printf(out, "%-16s %s: %s\n", rf_tally_recording_to_string(row->state), row->name,
                                   row->reason);
    }
    if (listed > MOST_LISTED)
        g_string_append_printf(out, "                 and %u more in recordings.csv\n", listed - MOST_LISTED);
}

char *rf_write_pool_summary(const RfResults *results, const char *out_folder)
{
    GString *out = g_string_new(results->verdict);
    g_string_append(out, "\n\n");
    unit(out, &results->unit);
    counts(out, results);
    agreement(out, results);
    absent(out, results);
    g_string_append_printf(out, "\nreport           %s/report.html\n", out_folder);
    return g_string_free(out, FALSE);
}
