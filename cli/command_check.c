#include <stdio.h>

#include "cli/command.h"
#include "cli/examine.h"
#include "cli/fitness_text.h"

static int is_whole; /* GOption writes an int */

static const GOptionEntry entries[] = {
    {"whole", 0, 0, G_OPTION_ARG_NONE, &is_whole, "look at every picture (default: 1800 from the middle)",
     NULL},
    {0},
};

static RfExit run(char **arguments, GError **error)
{
    const char *path;
    if (!rf_command_one_argument(arguments, "a recording", &path, error)) return RF_EXIT_USAGE;
    const RfWatchHooks hooks = {rf_command_common()->threads, rf_command_progress};
    RfFitnessFigures figures;
    if (!rf_examine_recording(path, is_whole, &hooks, &figures, error)) return RF_EXIT_INPUT;
    rf_command_progress_end();
    g_autoptr(GArray) lines = rf_fitness_judge(&figures);
    g_autofree char *text = rf_command_common()->as_json ? rf_fitness_json(path, &figures, lines)
                                                         : rf_fitness_text(path, &figures, lines);
    if (rf_command_common()->as_json || !rf_command_common()->is_quiet) fputs(text, stdout);
    return figures.droplets > 0 ? RF_EXIT_DONE : RF_EXIT_NOT_MEASURED;
}

const RfCommand rf_command_check = {
    .verb = "check",
    .arguments = "VIDEO",
    .purpose = "is this recording fit for measuring",
    .details = "Looks at the file and at up to 1800 pictures from its middle, without a run sheet. Each "
               "matter gets a line with a figure: ok, care (usable, with wider uncertainties), or BAD "
               "(what it would spoil), and what to do about it at the next recording.\n\n"
               "With --json every figure goes to standard output, with its unit in its name.",
    .example = "  risefall check morning.mkv\n"
               "prints one line a matter (timestamps, gaps, repeats, interlacing, exposure,\n"
               "noise, camera, contrast, compression ...): ok, care or BAD, with its figure\n"
               "and what to do next time. Exit status 3: no droplet was seen.",
    .entries = entries,
    .has_json = true,
    .run = run,
};
