#include "cli/command.h"
#include "cli/deliver.h"

static char *out, *paths;

static const GOptionEntry entries[] = {
    {"paths", 'p', 0, G_OPTION_ARG_FILENAME, &paths, "paths.csv of an earlier run", "FILE"},
    {"out", 'o', 0, G_OPTION_ARG_FILENAME, &out, "result folder; an earlier result there is replaced", "DIR"},
    {0},
};

static RfExit run(char **arguments, GError **error)
{
    const char *sheet;
    if (!rf_command_one_argument(arguments, "a run sheet", &sheet, error) ||
        !rf_command_required(paths, "--paths", "FILE", error) ||
        !rf_command_required(out, "--out", "DIR", error))
        return RF_EXIT_USAGE;
    return rf_deliver(sheet, paths, out, RF_DELIVER_CHARGE, RF_DELIVER_NO_FILM, error);
}

const RfCommand rf_command_charge = {
    .verb = "charge",
    .arguments = "SHEET --paths FILE --out DIR",
    .purpose = "velocities, switches and charges from paths that are already there",
    .details = "The second half of run: takes paths.csv of 'risefall paths' or of an earlier run, and "
               "scale.json beside it, and measures as run does. Cell, oil, air, voltage, states and laws may "
               "be corrected in the sheet in between.",
    .example = "  risefall charge morning.ini --paths morning-paths/paths.csv --out morning\n"
               "leaves the same files as run, without watching the recording again",
    .files = rf_deliver_files,
    .entries = entries,
    .has_json = true,
    .run = run,
};
