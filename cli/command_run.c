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
    return rf_deliver(sheet, NULL, out, RF_DELIVER_RUN, error);
}

const RfCommand rf_command_run = {
    .verb = "run",
    .arguments = "SHEET --out DIR",
    .purpose = "the whole job: paths, scale, switches, charges, unit, report",
    .example = "  risefall run morning.ini --out morning\n"
               "leaves morning/report.html to look at, beside it droplets.csv, summary.json ...",
    .entries = entries,
    .has_json = true,
    .run = run,
};
