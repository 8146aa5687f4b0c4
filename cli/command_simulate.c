#include "cli/command.h"
#include "cli/json_rows.h"
#include "cli/simulate.h"

#include <stdio.h>

static char *out;

static const GOptionEntry entries[] = {
    {"out", 'o', 0, G_OPTION_ARG_FILENAME, &out, "folder for footage and truth; an earlier one is replaced",
     "DIR"},
    {0},
};

static bool on_progress(int64_t done, int64_t total, void *user)
{
    (void)user;
    rf_command_progress("filming", done, total);
    return !rf_command_is_cancelled();
}

static void tell(const RfSimulateSummary *summary)
{
    if (rf_command_common()->as_json) {
        g_autoptr(GString) sheet = g_string_new(NULL);
        rf_json_rows_append_string(sheet, summary->sheet_path);
        printf("{\n  \"frames\": %" G_GINT64_FORMAT ",\n  \"duration_s\": %.6f,\n  \"droplets\": %d,\n"
               "  \"switches\": %d,\n  \"sheet\": %s\n}\n",
               summary->frames, summary->duration_s, summary->droplets, summary->switches, sheet->str);
    } else if (!rf_command_common()->is_quiet) {
        printf("%" G_GINT64_FORMAT " frames, %.1f s, %d droplets, %d switches\nrun sheet: %s\n",
               summary->frames, summary->duration_s, summary->droplets, summary->switches,
               summary->sheet_path);
    }
}

static RfExit run(char **arguments, GError **error)
{
    const char *scene;
    if (!rf_command_one_argument(arguments, "a scene file", &scene, error) ||
        !rf_command_required(out, "--out", "DIR", error))
        return RF_EXIT_USAGE;
    RfSimulateSummary summary = {0};
    if (!rf_simulate(scene, out, on_progress, NULL, &summary, error)) return RF_EXIT_INPUT;
    rf_command_progress_end();
    tell(&summary);
    rf_simulate_summary_clear(&summary);
    return RF_EXIT_DONE;
}

static const RfCommandFile files[] = {
    {"recording.mkv", "the film"},
    {"sheet.ini", "the run sheet for it"},
    {"reticle.png, timings.csv, volts.csv", "where the scene has them"},
    {"truth_*.csv, truth_*.json",
     "every path, droplet, switch, step, hand timing and input as it really was"},
    {0},
};

const RfCommand rf_command_simulate = {
    .verb = "simulate",
    .arguments = "SCENE --out DIR",
    .purpose = "synthetic footage of charged droplets, with its truth beside it",
    .details = "Films droplets of known radius and charge that settle, drift, diffuse and answer to the "
               "field as physics has it, through a microscope with a reticle, noise and a real encoder, "
               "and writes the sheet that goes with the film. What the sheet states differs from the "
               "truth by draws of its own uncertainties, as in life. The same scene gives the same "
               "bytes.\n\n"
               "Scenes and their keys are described in sample-synthetic/README.md.",
    .example = "  risefall simulate sample-synthetic/bench-morning.scene --out morning\n"
               "leaves morning/sheet.ini for 'risefall run', morning/truth_*.csv to compare with",
    .files = files,
    .entries = entries,
    .has_json = true,
    .run = run,
};
