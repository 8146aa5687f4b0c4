#include "cli/command.h"
#include "cli/deliver.h"

static char *out;
static int has_no_preview, has_overlay; /* GOption writes ints */

static const GOptionEntry entries[] = {
    {"out", 'o', 0, G_OPTION_ARG_FILENAME, &out, "result folder; an earlier result there is replaced", "DIR"},
    {"no-preview", 0, 0, G_OPTION_ARG_NONE, &has_no_preview,
     "no footage in the report: saves a second look at the recording", NULL},
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
    const unsigned films = (has_no_preview ? RF_DELIVER_NO_FILM : RF_DELIVER_PREVIEW) |
                           (has_overlay ? RF_DELIVER_OVERLAY : RF_DELIVER_NO_FILM);
    return rf_deliver(sheet, NULL, out, RF_DELIVER_RUN, films, error);
}

const RfCommand rf_command_run = {
    .verb = "run",
    .arguments = "SHEET --out DIR",
    .purpose = "the whole job: paths, scale, switches, charges, unit, report",
    .details = "Watches the recording that the sheet names, finds and follows every droplet, reads the "
               "scale off the reticle, finds the instants at which the field was switched, and "
               "estimates each droplet's radius and charge from its whole path: fall, response to the "
               "field and Brownian spread together. Hand timings that the sheet names are audited "
               "against the paths.\n\n"
               "The verdict, the unit of charge and the first droplets go to standard output; "
               "report.html shows where they come from. Where the droplets can't show a common unit, or "
               "a droplet's charge can't be defended, that is said with its reason instead of a number.\n\n"
               "With --overlay a film as long and as large as the recording is drawn besides: a ring and a "
               "number at each droplet (broken where it was not seen and its place is bridged), the paths so "
               "far of those in view, and below the picture the time, the frame and the field. Encoding it "
               "takes longer than everything else.\n\n"
               "With --json the text of summary.json goes to standard output instead.",
    .example = "  risefall run morning.ini --out morning\n"
               "leaves morning/report.html to look at, beside it droplets.csv, summary.json ...",
    .files = rf_deliver_files,
    .entries = entries,
    .has_ledger = true,
    .has_json = true,
    .run = run,
};
