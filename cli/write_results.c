#include "cli/write_results.h"

#include "cli/figure.h"
#include "cli/report_html.h"
#include "cli/write_audit.h"
#include "cli/write_csv.h"
#include "cli/write_json.h"

typedef struct {
    const char *name;
    GString *(*write)(const RfResults *results);
    bool is_for_paths; /* the command that stops at the paths writes it too */
} Table;

static const Table TABLES[] = {
    {"paths.csv", rf_write_csv_paths, true},
    {"segments.csv", rf_write_csv_segments, false},
    {"switches.csv", rf_write_csv_switches, false},
    {"steps.csv", rf_write_csv_steps, false},
    {"droplets.csv", rf_write_csv_droplets, false},
    {"audit.csv", rf_write_csv_audit, false},
    {"budget.csv", rf_write_csv_budget, false},
    {"influences.csv", rf_write_csv_influences, false},
    {"droplets-without-review.csv", rf_write_csv_droplets_without_review, false},
};

static bool tables(const RfResults *results, RfResultFolder *folder, RfWriteResultsPart part, GError **error)
{
    for (size_t i = 0; i < G_N_ELEMENTS(TABLES); i++) {
        if (part == RF_WRITE_RESULTS_PATHS && !TABLES[i].is_for_paths) continue;
        if (TABLES[i].write == rf_write_csv_audit && results->audit->len == 0) continue;
        if (TABLES[i].write == rf_write_csv_droplets_without_review && !results->without) continue;
        g_autoptr(GString) text = TABLES[i].write(results);
        if (!rf_result_folder_add(folder, TABLES[i].name, text->str, text->len, error)) return false;
    }
    return true;
}

static bool report(RfResults *results, RfResultFolder *folder, GError **error)
{
    g_autoptr(RfFigureSet) figures = rf_figure_draw(results, folder, error);
    if (!figures) return false;
    if (figures->warning) g_ptr_array_add(results->warnings, g_strdup(figures->warning));
    g_autoptr(GString) page = rf_report_html_new(results, figures);
    return rf_result_folder_add(folder, "report.html", page->str, page->len, error);
}

bool rf_write_results(RfResults *results, RfResultFolder *folder, RfWriteResultsPart part, GError **error)
{
    if (!tables(results, folder, part, error)) return false;
    g_autofree char *audit =
        part != RF_WRITE_RESULTS_PATHS && results->audit->len ? rf_write_audit_json(results) : NULL;
    if (audit && !rf_result_folder_add_text(folder, "audit.json", audit, error)) return false;
    g_autofree char *scale = rf_write_json_scale(results);
    if (!rf_result_folder_add_text(folder, "scale.json", scale, error)) return false;
    /* Before the report: whether gnuplot is installed must not change a byte of the JSON. */
    g_autofree char *summary = rf_write_json_summary(results);
    if (!rf_result_folder_add_text(folder, "summary.json", summary, error)) return false;
    return part == RF_WRITE_RESULTS_PATHS || report(results, folder, error);
}
