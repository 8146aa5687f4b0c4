#include "cli/command.h"
#include "cli/deliver.h"

static char *out;
static int has_overlay; /* GOption writes an int */

static const GOptionEntry entries[] = {
    {"out", 'o', 0, G_OPTION_ARG_FILENAME, &out, "result folder; an earlier result there is replaced", "DIR"},
    {"overlay", 0, 0, G_OPTION_ARG_NONE, &has_overlay,
     "overlay.mp4 besides: all of the recording with rings, numbers and paths over it", NULL},
    {0},
};

static RfExit run(char **arguments, GError **error)
{
    const char *sheet;
    if (!rf_command_one_argument(arguments, "a run sheet", &sheet, error) ||
        !rf_command_required(out, "--out", "DIR", error))
        return RF_EXIT_USAGE;
    return rf_deliver(sheet, NULL, out, RF_DELIVER_PATHS,
                      has_overlay ? RF_DELIVER_OVERLAY : RF_DELIVER_NO_FILM, error);
}

const RfCommand rf_command_paths = {
    .verb = "paths",
    .arguments = "SHEET --out DIR",
    .purpose = "every droplet's path and the scale, nothing measured from them yet",
    .details = "The first half of run: finds and follows the droplets and reads the scale. 'risefall "
               "charge' takes it from there, as often as air, voltage or laws in the sheet change, "
               "without watching the recording again.",
    .example = "  risefall paths morning.ini --out morning-paths\n"
               "leaves morning-paths/paths.csv, scale.json and summary.json",
    .files = rf_deliver_paths_files,
    .entries = entries,
    .has_json = true,
    .run = run,
};
