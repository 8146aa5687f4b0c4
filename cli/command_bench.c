#include <stdio.h>
#include <unistd.h>

#include "cli/bench_write.h"
#include "cli/command.h"
#include "cli/ledger_options.h"
#include "cli/result_folder.h"
#include "cli/text_wrap.h"

static char *since, *until, *out;
static char **with;
static int baseline;

static const GOptionEntry entries[] = {
    {"out", 'o', 0, G_OPTION_ARG_FILENAME, &out, "folder for the charts, their tables and a page", "DIR"},
    {"with", 0, 0, G_OPTION_ARG_STRING_ARRAY, &with, "with that setting or note; several may be given",
     "KEY=VALUE"},
    {"since", 0, 0, G_OPTION_ARG_STRING, &since, "measured on that day or later, as in 2026-03-14", "DATE"},
    {"until", 0, 0, G_OPTION_ARG_STRING, &until, "measured on that day or before", "DATE"},
    {"baseline", 0, 0, G_OPTION_ARG_INT, &baseline, "so many first recordings set the limits (default: 20)",
     "N"},
    {0},
};

static RfLedgerFilter filter(void)
{
    return (RfLedgerFilter){.since = since, .until = until, .with = (const char *const *)with};
}

static GPtrArray *charts_of_ledger(GError **error)
{
    const RfLedgerFilter wanted = filter();
    g_autoptr(RfLedger) ledger = rf_ledger_options_open(error);
    g_autoptr(GPtrArray) found = ledger ? rf_ledger_list(ledger, &wanted, error) : NULL;
    return found ? rf_bench_charts(found, (unsigned)baseline) : NULL;
}

static bool has_any_limits(const GPtrArray *charts)
{
    for (guint i = 0; i < charts->len; i++)
        if (((const RfBenchChart *)charts->pdata[i])->state != RF_BENCH_TOO_FEW) return true;
    return false;
}

static void tell(const GPtrArray *charts, const char *warning)
{
    const RfCommonOptions *common = rf_command_common();
    if (common->is_quiet && !common->as_json) return;
    g_autofree char *text =
        common->as_json ? rf_bench_write_json(charts)
                        : rf_bench_write_summary(charts, rf_text_wrap_terminal_columns(STDOUT_FILENO));
    fputs(charts->len || common->as_json ? text : "no recording in the ledger fits\n", stdout);
    if (warning && !common->is_quiet) fprintf(stderr, "risefall: note: %s\n", warning);
}

static bool are_options_right(char **arguments, GError **error)
{
    const RfLedgerFilter wanted = filter();
    if (!rf_ledger_options_are_right(arguments, &wanted, error)) return false;
    if (baseline == 0 || (baseline >= RF_CONTROL_CHART_BASELINE && baseline <= 100000)) return true;
    g_set_error(error, RF_COMMAND_ERROR, RF_COMMAND_ERROR_USAGE,
                "--baseline=%d: at least %d recordings are needed", baseline, RF_CONTROL_CHART_BASELINE);
    return false;
}

static RfExit run(char **arguments, GError **error)
{
    if (!are_options_right(arguments, error)) return RF_EXIT_USAGE;
    if (out && !rf_result_folder_may_replace(out, error)) return RF_EXIT_INPUT;
    g_autoptr(GPtrArray) charts = charts_of_ledger(error);
    g_autofree char *warning = NULL;
    if (!charts || (out && !rf_bench_write(out, charts, &warning, error))) return RF_EXIT_INPUT;
    tell(charts, warning);
    return has_any_limits(charts) ? RF_EXIT_DONE : RF_EXIT_NOT_MEASURED;
}

static const RfCommandFile files[] = {
    {"report.html", "a chart of each quantity, with what moved and when"},
    {"bench.csv", "one row a recording and quantity, with limits and signals"},
    {"bench.json", "one object a quantity: limits, verdict, the day it moved"},
    {"figures/", "the charts, with their data and scripts"},
    {0},
};

const RfCommand rf_command_bench = {
    .verb = "bench",
    .arguments = "[FILTERS] [--out DIR]",
    .purpose = "a bench over months: what the ledger says has moved, and when",
    .details = "Control charts of individuals and moving ranges (ISO 7870-2) of what the runs in the ledger "
               "found: the unit, the scale, "
               "the noise of positions, the drift across gravity, the air's temperature, and each operator's "
               "timing bias. The first "
               "recordings set the limits; later ones are judged by them. A point beyond three sigma, seven "
               "in a row on one side, "
               "seven in a row up or down, or a jump gives a signal; what lasts is dated by likelihood.\n\n"
               "A recording that was run several times counts once, with its latest run. Several benches in "
               "one ledger are told apart "
               "by a note in their sheets, as in bench=A, and --with bench=A.",
    .example = "  risefall bench --with bench=A --out bench-a\n"
               "says what has moved on bench A, and draws it in bench-a/report.html",
    .files = files,
    .entries = entries,
    .has_json = true,
    .has_ledger = true,
    .run = run,
};
