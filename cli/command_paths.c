#include "cli/command.h"
#include "cli/deliver.h"

static char *out;

static const GOptionEntry entries[] = {
    {"out", 'o', 0, G_OPTION_ARG_FILENAME, &out, "result folder; an earlier result there is replaced", "DIR"},
    {0},
};

static RfExit run(char **arguments, GError **error)
{
    const char *sheet;
    if (!rf_command_one_argument(arguments, "a run sheet", &sheet, error) ||
        !rf_command_required(out, "--out", "DIR", error))
        return RF_EXIT_USAGE;
    return rf_deliver(sheet, NULL, out, RF_DELIVER_PATHS, error);
}

const RfCommand rf_command_paths = {
    .verb = "paths",
    .arguments = "SHEET --out DIR",
    .purpose = "every droplet's path and the scale, nothing measured from them yet",
    .example = "  risefall paths morning.ini --out morning-paths\n"
               "leaves morning-paths/paths.csv, scale.json and summary.json",
    .entries = entries,
    .has_json = true,
    .run = run,
};
