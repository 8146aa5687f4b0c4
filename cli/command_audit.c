#include "cli/audit.h"
#include "cli/command.h"
#include "cli/read_results.h"
#include "cli/result_folder.h"
#include "cli/write_audit.h"

#include <glib/gstdio.h>
#include <stdio.h>

static char *against, *out;

static const GOptionEntry entries[] = {
    {"against", 'a', 0, G_OPTION_ARG_FILENAME, &against,
     "result folder of an earlier run of the same recording", "DIR"},
    {"out", 'o', 0, G_OPTION_ARG_FILENAME, &out,
     "folder for audit.csv, audit.json and a page", "DIR"},
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
    if (rf_command_common()->is_quiet) return;
    g_autofree char *summary = rf_write_audit_summary(results, out);
    fputs(summary, stdout);
    for (guint i = 0; i < results->warnings->len; i++)
        fprintf(stderr, "risefall: note: %s\n", (const char *)g_ptr_array_index(results->warnings, i));
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

static RfExit run(char **arguments, GError **error)
{
    const char *timings;
    if (!rf_command_one_argument(arguments, "a table of hand timings", &timings, error) ||
        !rf_command_required(against, "--against", "DIR", error))
        return RF_EXIT_USAGE;
    if (!is_elsewhere(error)) return RF_EXIT_USAGE;
    if (out && !rf_result_folder_may_replace(out, error)) return RF_EXIT_INPUT;
    RfMedium medium;
    bool has_medium;
    g_autoptr(RfResults) results = rf_read_results(against, &medium, &has_medium, error);
    if (!results || !rf_audit_timings(timings, results, has_medium ? &medium : NULL, error) ||
        !write_down(results, error))
        return RF_EXIT_INPUT;
    tell(results);
    return RF_EXIT_DONE;
}

const RfCommand rf_command_audit = {
    .verb = "audit",
    .arguments = "TIMINGS.csv --against DIR [--out DIR]",
    .purpose = "hand timings against what the recording shows, entry by entry",
    .example = "  risefall audit stopwatch.csv --against morning --out morning-audit\n"
               "tells which entries can be trusted, what went wrong with the others, and what\n"
               "the person's habit costs",
    .entries = entries,
    .run = run,
};
