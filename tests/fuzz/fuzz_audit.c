/* A stopwatch record against the result folder of an earlier run: CSV and JSON that anyone may have had in hand. The input's
 * parts are separated by form feeds. */
#include <math.h>
#include <stdlib.h>

#include "cli/audit.h"
#include "cli/read_results.h"
#include "cli/write_csv.h"
#include "tests/fuzz/target.h"

static void audit(RfResults *results, const RfMedium *medium)
{
    g_autofree char *timings = g_build_filename(rf_target_folder(), "timings.csv", NULL);
    GError *error = NULL;
    if (!rf_audit_timings(timings, results, medium, &error)) {
        rf_target_check_words(error);
        return;
    }
    for (guint i = 0; i < results->audit->len; i++) {
        const RfAuditRow *row = &g_array_index(results->audit, RfAuditRow, i);
        if (row->finding == NULL || !isfinite(row->difference_s) || !isfinite(row->en_number)) abort();
    }
    GString *text = rf_write_csv_audit(results);
    g_string_free(text, TRUE);
}

int LLVMFuzzerTestOneInput(const uint8_t *bytes, size_t size)
{
    static const char *const names[] = {"timings.csv",  "paths.csv",    "scale.json", "switches.csv",
                                        "droplets.csv", "summary.json", NULL};
    rf_target_files(names, bytes, size);
    RfMedium medium;
    bool has_medium = false;
    GError *error = NULL;
    g_autoptr(RfResults) results = rf_read_results(rf_target_folder(), &medium, &has_medium, &error);
    if (results != NULL)
        audit(results, has_medium ? &medium : NULL);
    else
        rf_target_check_words(error);
    return 0;
}
