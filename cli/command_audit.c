#include "cli/audit.h"
#include "cli/command.h"
#include "cli/digest.h"
#include "cli/ledger_keep.h"
#include "cli/read_results.h"
#include "cli/result_folder.h"
#include "cli/text_wrap.h"
#include "cli/write_audit.h"

#include <glib/gstdio.h>
#include <stdio.h>
#include <unistd.h>

static char *against, *out;

static const GOptionEntry entries[] = {
    {"against", 'a', 0, G_OPTION_ARG_FILENAME, &against,
     "result folder of an earlier run of the same recording", "DIR"},
    {"out", 'o', 0, G_OPTION_ARG_FILENAME, &out, "folder for audit.csv, audit.json and a page", "DIR"},
    {0},
};

static bool write_down(const RfResults *results, GError **error)
{
    if (!out) return true;
    g_autoptr(RfResultFolder) folder = rf_result_folder_open(out, error);
    return folder && rf_write_audit(results, folder, error) && rf_result_folder_commit(folder, error);
}

static void tell(const RfResults *results)
{
    const RfCommonOptions *common = rf_command_common();
    if (common->is_quiet && !common->as_json) return;
    const int columns = isatty(STDOUT_FILENO) ? rf_text_wrap_terminal_columns(STDOUT_FILENO) : G_MAXINT;
    g_autofree char *summary =
        common->as_json ? rf_write_audit_json(results) : rf_write_audit_summary(results, out, columns);
    fputs(summary, stdout);
    if (common->is_quiet) return;
    for (guint i = 0; i < results->warnings->len; i++)
        fprintf(stderr, "risefall: note: %s\n", (const char *)g_ptr_array_index(results->warnings, i));
}

static void add_input(RfLedgerEntry *entry, const char *role, const char *path)
{
    g_autofree char *sha256 = rf_digest_file(path, NULL);
    if (sha256) rf_ledger_entry_add_input(entry, role, path, sha256);
}

static void enter(const RfResults *results, const char *timings)
{
    g_autoptr(RfLedgerEntry) entry = rf_ledger_entry_from_results("audit", results, out);
    g_autofree char *summary = g_build_filename(against, "summary.json", NULL);
    add_input(entry, "hand timings", timings);
    add_input(entry, "results", summary);
    rf_ledger_keep(entry);
}

/* The results would be replaced by their audit. */
static bool is_elsewhere(GError **error)
{
    g_autofree char *from = g_canonicalize_filename(against, NULL),
                    *to = out ? g_canonicalize_filename(out, NULL) : NULL;
    GStatBuf one, other;
    bool is_same =
        to && (g_str_equal(from, to) || (g_stat(from, &one) == 0 && g_stat(to, &other) == 0 &&
                                         one.st_dev == other.st_dev && one.st_ino == other.st_ino));
    if (is_same)
        g_set_error(error, RF_COMMAND_ERROR, RF_COMMAND_ERROR_USAGE,
                    "--out %s is the folder of --against, whose results would be lost; name another", out);
    return !is_same;
}

static bool is_result(GError **error)
{
    g_autofree char *paths = g_build_filename(against, "paths.csv", NULL);
    if (g_file_test(paths, G_FILE_TEST_EXISTS)) return true;
    g_set_error(error, G_FILE_ERROR, G_FILE_ERROR_NOENT,
                "--against %s: no paths.csv there; the result folder of an earlier run is needed", against);
    return false;
}

static RfExit run(char **arguments, GError **error)
{
    const char *timings;
    if (!rf_command_one_argument(arguments, "a table of hand timings", &timings, error) ||
        !rf_command_required(against, "--against", "DIR", error))
        return RF_EXIT_USAGE;
    if (!is_elsewhere(error)) return RF_EXIT_USAGE;
    if (!is_result(error)) return RF_EXIT_INPUT;
    if (out && !rf_result_folder_may_replace(out, error)) return RF_EXIT_INPUT;
    RfMedium medium;
    bool has_medium;
    g_autoptr(RfResults) results = rf_read_results(against, &medium, &has_medium, error);
    if (!results || !rf_audit_timings(timings, results, has_medium ? &medium : NULL, error) ||
        !write_down(results, error))
        return RF_EXIT_INPUT;
    tell(results);
    enter(results, timings);
    return RF_EXIT_DONE;
}

static const RfCommandFile files[] = {
    {"audit.csv", "a row for each entry: its droplet, both times, their difference, the finding"},
    {"audit.json", "the same rows, the person's habit, charges from hand timings alone"},
    {"report.html", "the audit as a page"},
    {0},
};

const RfCommand rf_command_audit = {
    .verb = "audit",
    .arguments = "TIMINGS.csv --against DIR [--out DIR]",
    .purpose = "hand timings against what the recording shows, entry by entry",
    .details = "Compares a table of hand timings, entry by entry, with the passages of the same "
               "droplets over the reticle's lines in an earlier result. Each entry gets a finding: "
               "agrees, disagrees, other droplet, line miscount, digit slip, field switched inside, or "
               "unmatched, with what speaks for it and where to look. From the sound entries follow the "
               "person's bias and spread, and what they do to a velocity and a charge.\n\n"
               "The table has a header and the columns entry, label, motion (fall or rise), divisions "
               "or distance_mm, time_s, voltage_V, and start_s where the clock was noted; semicolons, "
               "decimal commas and byte-order marks are read. With --json the text of audit.json goes "
               "to standard output.",
    .example = "  risefall audit stopwatch.csv --against morning --out morning-audit\n"
               "tells which entries can be trusted, what went wrong with the others, and what\n"
               "the person's habit costs",
    .files = files,
    .entries = entries,
    .has_json = true,
    .has_ledger = true,
    .run = run,
};
