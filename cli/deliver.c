#include "cli/deliver.h"

#include "cli/ledger_keep.h"
#include "cli/overlay_film.h"
#include "cli/pipeline.h"
#include "cli/preview_film.h"
#include "cli/result_folder.h"
#include "cli/screen_summary.h"
#include "cli/text_wrap.h"
#include "cli/write_json.h"
#include "cli/write_results.h"

#include <glib/gstdio.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <unistd.h>

const RfCommandFile rf_deliver_files[] = {
    {"report.html", "the page to look at; opens from disk in any browser"},
    {"droplets.csv", "radius and charge, a row for each spell of constant charge"},
    {"segments.csv", "velocities, a row for each droplet and field state"},
    {"switches.csv", "when the field was switched"},
    {"steps.csv", "when a droplet changed its charge"},
    {"paths.csv", "every droplet in every frame: place, its uncertainty, measured or bridged"},
    {"budget.csv", "what each input adds to the uncertainty of a charge"},
    {"influences.csv", "what one standard uncertainty of each input does to each charge; for pooling"},
    {"audit.csv, audit.json", "verdicts on hand timings, where the sheet names them"},
    {"scale.json", "pixels per millimetre"},
    {"summary.json", "verdict, unit, warnings, every setting and default, digests of all inputs"},
    {"figures/", "each figure as SVG and PDF, its data and its plotting script"},
    {"overlay.mp4", "with --overlay: the recording with rings, numbers and paths drawn over it"},
    {0},
};

const RfCommandFile rf_deliver_paths_files[] = {
    {"paths.csv", "every droplet in every frame: place, its uncertainty, measured or bridged"},
    {"scale.json", "pixels per millimetre"},
    {"summary.json", "warnings, every setting and default, digests of all inputs"},
    {"overlay.mp4", "with --overlay: the recording with rings, numbers and paths drawn over it"},
    {0},
};

typedef struct {
    const char *paths_csv, *out;
    RfDeliverKind kind;
    unsigned films;
    RfWatchHooks hooks;
} Order;

static RfResults *make(const RfSettings *settings, const Order *order, GError **error)
{
    switch (order->kind) {
    case RF_DELIVER_PATHS:
        return rf_pipeline_paths(settings, &order->hooks, error);
    case RF_DELIVER_CHARGE:
        return rf_pipeline_charge(settings, order->paths_csv, &order->hooks, error);
    case RF_DELIVER_RUN:
        break;
    }
    return rf_pipeline_run(settings, &order->hooks, error);
}

/* A result without a film is no reason to lose the run; to be told to stop is. (takes failure) */
static bool may_go_on(GError *failure, RfResults *results, const char *what, GError **error)
{
    if (!failure) return true;
    if (g_error_matches(failure, RF_VIDEO_ERROR, RF_VIDEO_ERROR_CANCELLED)) {
        g_propagate_error(error, failure);
        return false;
    }
    rf_results_warn(results, "%s: %s", what, failure->message);
    g_error_free(failure);
    return true;
}

static bool film_preview(const RfSettings *settings, const RfFilmHooks *hooks, RfResults *results,
                         const RfResultFolder *folder, GError **error)
{
    GError *failure = NULL;
    g_autofree char *scratch = g_build_filename(rf_result_folder_path(folder), "preview.webm", NULL);
    results->preview = rf_preview_film(settings, results, hooks, scratch, &failure);
    return may_go_on(failure, results, "no footage in the report", error);
}

static bool film_overlay(const RfSettings *settings, const RfFilmHooks *hooks, RfResults *results,
                         const RfResultFolder *folder, GError **error)
{
    GError *failure = NULL;
    g_autofree char *path = g_build_filename(rf_result_folder_path(folder), "overlay.mp4", NULL);
    if (!rf_overlay_film(settings, results, hooks, path, &failure)) g_remove(path);
    return may_go_on(failure, results, "no overlay film", error);
}

static bool film(const RfSettings *settings, const Order *order, RfResults *results,
                 const RfResultFolder *folder, GError **error)
{
    const RfFilmHooks hooks = {order->hooks.threads, order->hooks.progress, rf_command_is_cancelled};
    if (order->films & RF_DELIVER_PREVIEW && !film_preview(settings, &hooks, results, folder, error))
        return false;
    return !(order->films & RF_DELIVER_OVERLAY) || film_overlay(settings, &hooks, results, folder, error);
}

static bool write_down(const RfSettings *settings, const Order *order, RfResults *results, GError **error)
{
    g_autoptr(RfResultFolder) folder = rf_result_folder_open(order->out, error);
    RfWriteResultsPart part = order->kind == RF_DELIVER_PATHS ? RF_WRITE_RESULTS_PATHS : RF_WRITE_RESULTS_ALL;
    return folder && film(settings, order, results, folder, error) &&
           rf_write_results(results, folder, part, error) && rf_result_folder_commit(folder, error);
}

static void note(const char *text)
{
    g_autofree char *line = g_strdup_printf("risefall: note: %s", text);
    g_autoptr(GString) wrapped = g_string_new(NULL);
    const int columns = isatty(STDERR_FILENO) ? rf_text_wrap_terminal_columns(STDERR_FILENO) : G_MAXINT;
    rf_text_wrap_append(wrapped, line, 0, columns, false);
    fputs(wrapped->str, stderr);
}

static char *page(const RfResults *results, const char *out, RfDeliverKind kind)
{
    const RfScreen screen = rf_screen_on(STDOUT_FILENO);
    return kind == RF_DELIVER_PATHS ? rf_screen_summary_paths_new(results, out, &screen)
                                    : rf_screen_summary_new(results, out, &screen);
}

/* Notes first: the page is to stay on the screen as a whole. */
static void tell(const RfResults *results, const char *out, RfDeliverKind kind)
{
    const RfCommonOptions *common = rf_command_common();
    for (guint i = 0; i < results->warnings->len && !common->is_quiet; i++)
        note(g_ptr_array_index(results->warnings, i));
    if (common->is_quiet && !common->as_json) return;
    g_autofree char *summary = common->as_json ? rf_write_json_summary(results) : page(results, out, kind);
    fputs(summary, stdout);
}

static void enter(const RfResults *results, const char *out)
{
    g_autoptr(RfLedgerEntry) entry = rf_ledger_entry_from_results("run", results, out);
    rf_ledger_keep(entry);
}

static bool is_inside(const char *folder, const char *path)
{
    char *outer = realpath(folder, NULL), *inner = path ? realpath(path, NULL) : NULL;
    const size_t length = outer ? strlen(outer) : 0;
    const bool is = outer && inner && strncmp(inner, outer, length) == 0 && inner[length] == '/';
    free(outer);
    free(inner);
    return is;
}

/* The folder of --out is replaced as a whole, and what lay in it is lost: footage that simulate made, say. Reviews aren't:
 * result_folder takes them over, or refuses. */
static bool spares(const char *out, const char *input, GError **error)
{
    if (!is_inside(out, input)) return true;
    g_set_error(error, RF_RESULT_FOLDER_ERROR, RF_RESULT_FOLDER_ERROR_FOREIGN,
                "%s: holds %s, which this run reads, and would be replaced as a whole; name another --out",
                out, input);
    return false;
}

static bool spares_inputs(const char *out, const RfSettings *settings, GError **error)
{
    for (guint i = 0; i < settings->videos->len; i++)
        if (!spares(out, settings->videos->pdata[i], error)) return false;
    return spares(out, settings->path, error) && spares(out, settings->reticle_image, error) &&
           spares(out, settings->log, error) && spares(out, settings->timings, error);
}

static RfExit carry_out(const RfSettings *settings, const Order *order, GError **error)
{
    g_autoptr(RfResults) results = make(settings, order, error);
    rf_command_progress_end();
    const bool is_written = results && write_down(settings, order, results, error);
    rf_command_progress_end();
    if (!is_written) return RF_EXIT_INPUT;
    tell(results, order->out, order->kind);
    if (order->kind == RF_DELIVER_RUN) enter(results, order->out);
    return results->measured ? RF_EXIT_DONE : RF_EXIT_NOT_MEASURED;
}

RfExit rf_deliver(const char *sheet, const char *paths_csv, const char *out, RfDeliverKind kind,
                  unsigned films, GError **error)
{
    /* A target that can't be replaced is said now, not after the work. */
    if (!rf_result_folder_may_replace(out, error)) return RF_EXIT_INPUT;
    g_autoptr(RfSettings) settings = rf_settings_load(sheet, error);
    if (!settings || !spares_inputs(out, settings, error)) return RF_EXIT_INPUT;
    const Order order = {
        .paths_csv = paths_csv,
        .out = out,
        .kind = kind,
        .films = films,
        .hooks = {.threads = rf_command_common()->threads, .progress = rf_command_progress},
    };
    return carry_out(settings, &order, error);
}
