#include "cli/command.h"
#include "cli/simulate.h"

#include <stdio.h>

static char *out;

static const GOptionEntry entries[] = {
    {"out", 'o', 0, G_OPTION_ARG_FILENAME, &out, "folder for footage and truth; an earlier one is replaced", "DIR"},
    {0},
};

static bool on_progress(int64_t done, int64_t total, void *user)
{
    (void)user;
    rf_command_progress("filming", done, total);
    return !rf_command_is_cancelled();
}

static RfExit run(char **arguments, GError **error)
{
    const char *scene;
    if (!rf_command_one_argument(arguments, "a scene file", &scene, error) ||
        !rf_command_required(out, "--out", "DIR", error))
        return RF_EXIT_USAGE;
    RfSimulateSummary summary = {0};
    if (!rf_simulate(scene, out, on_progress, NULL, &summary, error))
        return RF_EXIT_INPUT;
    rf_command_progress_end();
    if (!rf_command_common()->is_quiet)
        printf("%" G_GINT64_FORMAT " frames, %.1f s, %d droplets, %d switches\nrun sheet: %s\n", summary.frames,
               summary.duration_s, summary.droplets, summary.switches, summary.sheet_path);
    rf_simulate_summary_clear(&summary);
    return RF_EXIT_DONE;
}

const RfCommand rf_command_simulate = {
    .verb = "simulate",
    .arguments = "SCENE --out DIR",
    .purpose = "synthetic footage of charged droplets, with its truth beside it",
    .example = "  risefall simulate sample-synthetic/bench-morning.scene --out morning\n"
               "leaves morning/sheet.ini for 'risefall run', morning/truth_*.csv to compare with",
    .entries = entries,
    .run = run,
};
