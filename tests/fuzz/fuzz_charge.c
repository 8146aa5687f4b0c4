/* Paths that someone brings, measured as `risefall charge` does: parts paths.csv, scale.json and volts.csv, separated by form
 * feeds. Every number that comes out is finite. */
#include <math.h>
#include <stdlib.h>
#include <string.h>

#include "cli/pipeline.h"
#include "cli/write_csv.h"
#include "cli/write_json.h"
#include "tests/fuzz/target.h"

/* Measuring takes the square of the number of rows where they make no sense; an hour's paths aren't needed to go wrong. */
enum { MOST_BYTES = 1 << 14 };

static const char sheet[] = "[recording]\nvideo=sheet.ini\n[reticle]\nspacing=0.1000(2) mm\n"
                            "[cell]\nplate_gap=6.000(10) mm\n[oil]\ndensity=886.0(10) kg/m^3\n"
                            "[air]\ntemperature=23.0(2) degC\npressure=101.30(5) kPa\nhumidity=45(5) %\n"
                            "[supply]\nvoltage=500.0(5) V\nstates=off,top+\n";

static void check_text(GString *table)
{
    if (strstr(table->str, "nan") != NULL || strstr(table->str, "inf") != NULL) abort();
    g_string_free(table, TRUE);
}

static void check(RfResults *results)
{
    check_text(rf_write_csv_segments(results));
    check_text(rf_write_csv_switches(results));
    check_text(rf_write_csv_steps(results));
    check_text(rf_write_csv_budget(results));
    for (guint i = 0; i < results->droplets->len; i++) {
        const RfDropletRow *row = &g_array_index(results->droplets, RfDropletRow, i);
        if (!isfinite(row->radius_um.value) || !isfinite(row->radius_um.sigma)) abort();
        if (!isfinite(row->charge_C.value) || !isfinite(row->charge_C.sigma)) abort();
        if (!isfinite(row->fall_mm_s.value) || !isfinite(row->u_random_C)) abort();
    }
    g_autofree char *summary = rf_write_json_summary(results);
    if (summary == NULL || results->verdict == NULL) abort();
}

int LLVMFuzzerTestOneInput(const uint8_t *bytes, size_t size)
{
    static const char *const names[] = {"paths.csv", "scale.json", "volts.csv", NULL};
    if (size > MOST_BYTES) return 0;
    rf_target_files(names, bytes, size);
    g_autofree char *volts = g_build_filename(rf_target_folder(), "volts.csv", NULL);
    g_autofree char *text =
        g_strconcat(sheet, g_file_test(volts, G_FILE_TEST_EXISTS) ? "log=volts.csv\n" : "", NULL);
    g_autofree char *path = rf_target_file("sheet.ini", text, strlen(text));
    g_autofree char *paths = g_build_filename(rf_target_folder(), "paths.csv", NULL);
    const RfWatchHooks hooks = {.threads = 1};
    GError *error = NULL;
    g_autoptr(RfSettings) settings = rf_settings_load(path, &error);
    g_assert_no_error(error);
    g_autoptr(RfResults) results = rf_pipeline_charge(settings, paths, &hooks, &error);
    if (results != NULL)
        check(results);
    else
        rf_target_check_words(error);
    return 0;
}
