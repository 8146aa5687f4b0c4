#include "calib/table.h"
#include "cli/command.h"
#include "cli/digest.h"
#include "cli/ledger_keep.h"
#include "cli/pool.h"
#include "cli/result_folder.h"
#include "cli/write_json.h"
#include "cli/write_pool.h"

#include <stdio.h>
#include <string.h>

static char *out, *failed;

static const GOptionEntry entries[] = {
    {"out", 'o', 0, G_OPTION_ARG_FILENAME, &out, "folder of the pool; an earlier one there is replaced",
     "DIR"},
    {"failed", 0, 0, G_OPTION_ARG_FILENAME, &failed,
     "table recording,reason of those without a result, to be listed", "LIST.csv"},
    {0},
};

static void failure_clear(void *item)
{
    RfPoolFailure *failure = item;
    g_free(failure->name);
    g_free(failure->reason);
}

static bool read_failures(GArray *failures, GError **error)
{
    if (!failed) return true;
    g_autoptr(RfTable) table = rf_table_read(failed, error);
    size_t name, reason;
    if (!table || !rf_table_require(table, "recording", &name, error) ||
        !rf_table_require(table, "reason", &reason, error))
        return false;
    for (size_t row = 0; row < rf_table_rows(table); row++) {
        const RfPoolFailure failure = {g_strdup(rf_table_text(table, row, name)),
                                       g_strdup(rf_table_text(table, row, reason))};
        g_array_append_val(failures, failure);
    }
    return true;
}

static bool read_folders(char **folders, GPtrArray *recordings, GError **error)
{
    const guint n = g_strv_length(folders);
    for (guint i = 0; i < n; i++) {
        rf_command_progress("reading", i, n);
        RfPoolRecording *recording = rf_pool_read(folders[i], error);
        if (!recording) return false;
        g_ptr_array_add(recordings, recording);
    }
    return true;
}

/* The pool's own folder among those to be pooled would be replaced by what is made of it. */
static bool is_elsewhere(char **folders, GError **error)
{
    g_autofree char *to = g_canonicalize_filename(out, NULL);
    for (; *folders; folders++) {
        g_autofree char *from = g_canonicalize_filename(*folders, NULL);
        if (strcmp(from, to) != 0) continue;
        g_set_error(error, RF_COMMAND_ERROR, RF_COMMAND_ERROR_USAGE,
                    "--out %s is one of the folders to be pooled, whose result would be lost; name another",
                    out);
        return false;
    }
    return true;
}

static bool write_down(RfResults *results, GError **error)
{
    g_autoptr(RfResultFolder) folder = rf_result_folder_open(out, error);
    return folder && rf_write_pool(results, folder, error) && rf_result_folder_commit(folder, error);
}

static void tell(const RfResults *results)
{
    const RfCommonOptions *common = rf_command_common();
    if (common->is_quiet && !common->as_json) return;
    g_autofree char *summary =
        common->as_json ? rf_write_json_pool(results) : rf_write_pool_summary(results, out);
    fputs(summary, stdout);
    if (common->is_quiet) return;
    for (guint i = 0; i < results->warnings->len; i++)
        fprintf(stderr, "risefall: note: %s\n", (const char *)g_ptr_array_index(results->warnings, i));
}

/* What went in are the summaries of the pooled results: their digests say which runs these were. */
static void enter(const RfResults *results, char **folders)
{
    g_autoptr(RfLedgerEntry) entry = rf_ledger_entry_from_results("pool", results, out);
    for (; *folders; folders++) {
        g_autofree char *summary = g_build_filename(*folders, "summary.json", NULL),
                        *sha256 = rf_digest_file(summary, NULL);
        if (sha256) rf_ledger_entry_add_input(entry, "results", summary, sha256);
    }
    rf_ledger_keep(entry);
}

static bool is_usage_right(char **arguments, GError **error)
{
    if (arguments && *arguments)
        return rf_command_required(out, "--out", "DIR", error) && is_elsewhere(arguments, error);
    g_set_error(error, RF_COMMAND_ERROR, RF_COMMAND_ERROR_USAGE, "missing argument: result folders of runs");
    return false;
}

static RfExit run(char **arguments, GError **error)
{
    if (!is_usage_right(arguments, error)) return RF_EXIT_USAGE;
    if (!rf_result_folder_may_replace(out, error)) return RF_EXIT_INPUT;
    g_autoptr(GPtrArray) recordings = g_ptr_array_new_with_free_func((GDestroyNotify)rf_pool_recording_free);
    g_autoptr(GArray) failures = g_array_new(FALSE, TRUE, sizeof(RfPoolFailure));
    g_array_set_clear_func(failures, failure_clear);
    if (!read_failures(failures, error) || !read_folders(arguments, recordings, error)) return RF_EXIT_INPUT;
    g_autoptr(RfResults) results = rf_pool_join(recordings, failures, error);
    rf_command_progress_end();
    if (!results || !write_down(results, error)) return RF_EXIT_INPUT;
    tell(results);
    enter(results, arguments);
    return results->measured ? RF_EXIT_DONE : RF_EXIT_NOT_MEASURED;
}

static const RfCommandFile files[] = {
    {"recordings.csv",
     "a row for each recording: its own unit, its weight, how far it is from what the others let "
     "expect, the pooled unit without it; those without a result with their reason"},
    {"droplets.csv", "every droplet of every recording"},
    {"measurements.csv", "what each measurement, shared or not, adds to the uncertainty of the pooled unit"},
    {"pool.json", "the pooled unit, the tests of agreement, warnings"},
    {"report.html", "all of it as a page, with figures/"},
    {0},
};

const RfCommand rf_command_pool = {
    .verb = "pool",
    .arguments = "RESULTDIR... --out DIR",
    .purpose = "one unit from the droplets of many recordings; is one of them off?",
    .details =
        "Takes the result folders of runs. Inputs that the sheets name alike in [shared] "
        "(plate_gap=gap-march) are one and the same measurement: what it is wrong by is common to all "
        "recordings that use it and doesn't average out. What isn't named counts as measured anew for "
        "each recording. Laws are common to all.\n\n"
        "Each recording's own unit is held against what all others let expect of it, and the pooled unit "
        "is given without each in turn. A recording that is off is named, not dropped: leave its folder "
        "out once it is known what went wrong.\n\n"
        "The same recording twice, and one name for two different values, are refused. With --json the "
        "text of pool.json goes to standard output.",
    .example = "  risefall pool monday tuesday wednesday --out week\n"
               "leaves week/report.html; what the sheets name in [shared] stays common to all",
    .files = files,
    .entries = entries,
    .has_json = true,
    .has_ledger = true,
    .run = run,
};
