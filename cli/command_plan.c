#include <math.h>
#include <stdio.h>

#include "calib/quantity.h"
#include "cli/command.h"
#include "cli/conditions.h"
#include "cli/plan_write.h"
#include "cli/result_folder.h"

static char *off_time, *on_time, *frame_rate, *view, *noise, *voltage, *out;

static const GOptionEntry entries[] = {
    {"off-time", 0, 0, G_OPTION_ARG_STRING, &off_time,
     "time watched with the field off, in all (default: 20 s)", "Q"},
    {"on-time", 0, 0, G_OPTION_ARG_STRING, &on_time, "the same with the field on (default: 20 s)", "Q"},
    {"frame-rate", 0, 0, G_OPTION_ARG_STRING, &frame_rate,
     "frames per second (default: the sheet's, else 30 Hz)", "Q"},
    {"view", 0, 0, G_OPTION_ARG_STRING, &view, "height of the field of view (default: 1 mm)", "Q"},
    {"noise", 0, 0, G_OPTION_ARG_STRING, &noise, "uncertainty of one position in the cell (default: 0.5 um)",
     "Q"},
    {"voltage", 0, 0, G_OPTION_ARG_STRING, &voltage,
     "between the plates while the field is on (default: the sheet's)", "Q"},
    {"out", 'o', 0, G_OPTION_ARG_FILENAME, &out, "also leave the whole table and a chart there", "DIR"},
    {0},
};

/* What the option says, or `otherwise`. */
static bool positive(const char *option, const char *text, const char *si_unit, double otherwise,
                     double *number, GError **error)
{
    *number = otherwise;
    if (!text) return true;
    RfValue value;
    g_autoptr(GError) reason = NULL;
    if (!rf_quantity_parse(text, si_unit, &value, &reason)) {
        g_set_error(error, RF_COMMAND_ERROR, RF_COMMAND_ERROR_USAGE, "%s: %s", option, reason->message);
        return false;
    }
    *number = value.value;
    if (value.value > 0) return true;
    g_set_error(error, RF_COMMAND_ERROR, RF_COMMAND_ERROR_USAGE, "%s=%s: a value above zero is needed",
                option, text);
    return false;
}

/* The bounds need a few frames in either state; sums over a day's frames would take the day. */
static bool are_enough_frames(const RfObservation *observation, GError **error)
{
    static const double LEAST_FRAMES = 4, MOST_FRAMES = 1e6;
    const double least = fmin(observation->off_s, observation->on_s) * observation->frame_rate_hz;
    const double most = fmax(observation->off_s, observation->on_s) * observation->frame_rate_hz;
    if (least >= LEAST_FRAMES && most <= MOST_FRAMES) return true;
    g_set_error(error, RF_COMMAND_ERROR, RF_COMMAND_ERROR_USAGE,
                "--off-time, --on-time: %.4g s and %.4g s are %.3g and %.3g frames; 4 to 1000000 are needed "
                "in either",
                observation->off_s, observation->on_s, observation->off_s * observation->frame_rate_hz,
                observation->on_s * observation->frame_rate_hz);
    return false;
}

static double sheet_voltage_V(const RfSettings *settings)
{
    double found_V = 0;
    for (int state = RF_FIELD_TOP_PLUS; state <= RF_FIELD_TOP_MINUS; state++) {
        RfValue value;
        if (rf_settings_voltage(settings, (RfFieldState)state, &value)) found_V = fmax(found_V, value.value);
    }
    return found_V;
}

static bool observation_of(const RfSettings *settings, RfObservation *observation, GError **error)
{
    const double sheet_rate_hz = settings->frame_rate_hz.is_set ? settings->frame_rate_hz.v.value : 30;
    *observation = (RfObservation){.blur = 1.0 / 6}; /* an open shutter, as most cameras in dim light */
    if (!positive("--off-time", off_time, "s", 20, &observation->off_s, error) ||
        !positive("--on-time", on_time, "s", 20, &observation->on_s, error) ||
        !positive("--frame-rate", frame_rate, "Hz", sheet_rate_hz, &observation->frame_rate_hz, error) ||
        !positive("--view", view, "m", 1e-3, &observation->view_m, error) ||
        !positive("--noise", noise, "m", 0.5e-6, &observation->localisation_m, error) ||
        !positive("--voltage", voltage, "V", sheet_voltage_V(settings), &observation->voltage_V, error) ||
        !are_enough_frames(observation, error))
        return false;
    if (observation->voltage_V > 0) return true;
    g_set_error(error, RF_SETTINGS_ERROR, RF_SETTINGS_ERROR_MISSING,
                "%s: [supply] names no voltage, and none is given by --voltage; a plan needs one, as in "
                "voltage=500.0(5) V",
                settings->path);
    return false;
}

/* The scale isn't measured yet: as good as the reticle's certificate. */
static double scale_relative_u(const RfSettings *settings)
{
    return hypot(settings->spacing_m.sigma / settings->spacing_m.value,
                 settings->plane_ratio.sigma / settings->plane_ratio.value);
}

static bool plan(const RfSettings *settings, GError **error)
{
    const RfChargeInputs inputs = rf_conditions_of(settings, scale_relative_u(settings));
    RfPlanConditions conditions = {.medium = rf_charge_budget_medium(&inputs)};
    RfPlanCommon common;
    if (!observation_of(settings, &conditions.observation, error) || !rf_plan_common(&inputs, &common, error))
        return false;
    g_autoptr(GArray) rows = rf_plan_rows(&conditions);
    g_autofree char *text = rf_plan_text(&conditions, rows, &common), *warning = NULL;
    if (out && !rf_plan_write(out, &conditions, rows, text, &warning, error)) return false;
    g_autofree char *json = rf_command_common()->as_json ? rf_plan_json(&conditions, rows, &common) : NULL;
    if (json)
        fputs(json, stdout);
    else if (!rf_command_common()->is_quiet)
        fputs(text, stdout);
    if (warning) fprintf(stderr, "risefall: note: %s\n", warning);
    return true;
}

static RfExit run(char **arguments, GError **error)
{
    const char *sheet;
    if (!rf_command_one_argument(arguments, "a run sheet", &sheet, error)) return RF_EXIT_USAGE;
    if (out && !rf_result_folder_may_replace(out, error)) return RF_EXIT_INPUT;
    g_autoptr(RfSettings) settings = rf_settings_load(sheet, error);
    return settings && plan(settings, error) ? RF_EXIT_DONE : RF_EXIT_INPUT;
}

static const RfCommandFile files[] = {
    {"plan.csv", "the whole table"},
    {"plan.txt", "what stands on the screen"},
    {"figures/plan.svg, plan.pdf",
     "attainable uncertainty of the charge against radius; data and script beside them"},
    {0},
};

const RfCommand rf_command_plan = {
    .verb = "plan",
    .arguments = "SHEET",
    .purpose = "before recording: which droplets, how long, what uncertainty",
    .details = "Needs the sheet's cell, oil, air and voltage, not the recording. For radii and charges "
               "that are usual it lists the speeds, how long a droplet stays in view, and the best "
               "uncertainty of its charge that any estimator can reach in the time given; and from "
               "that, which droplets to pick, how long to watch, and what voltage makes most of them "
               "worth it.\n\n"
               "Times, rates and lengths are quantities with their unit, as in '30 s'. With --json "
               "conditions and table go to standard output.",
    .example = "  risefall plan morning.ini --on-time '30 s' --view '1.2 mm' --out plan\n"
               "prints what radius and charge make of speed and uncertainty, which droplets\n"
               "to pick, how long to watch and at what voltage; leaves plan/plan.csv and\n"
               "plan/figures/plan.svg. The recording needn't exist yet.",
    .files = files,
    .entries = entries,
    .has_json = true,
    .run = run,
};
