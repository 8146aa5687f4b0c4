#include "calib/quantity.h"
#include "cli/command.h"
#include "cli/ruler.h"
#include "cli/settings.h"
#include "cli/text_number.h"
#include "cli/view.h"
#include "cli/watch.h"
#include "cli/write_json.h"

#include <math.h>
#include <stdio.h>
#include <string.h>

static char *spacing, *lines, *picture_path;

static const GOptionEntry entries[] = {
    {"spacing", 's', 0, G_OPTION_ARG_STRING, &spacing, "between neighbouring lines (needed with an IMAGE)",
     "Q"},
    {"lines", 'l', 0, G_OPTION_ARG_STRING, &lines, "which lines the reticle has (default: grid)",
     "grid|horizontal|vertical"},
    {"picture", 'p', 0, G_OPTION_ARG_FILENAME, &picture_path, "PNG of the picture with the lines found",
     "FILE"},
    {0},
};

/* The picture that was measured, brightened, beside its scale. */
typedef struct {
    RfLengthScale *scale;
    char *source; /* what was measured: a file, or the recording's own background */
    unsigned char *grey;
    int width, height;
} Calibration;

static void calibration_clear(Calibration *calibration)
{
    rf_length_scale_free(calibration->scale);
    g_free(calibration->source);
    g_free(calibration->grey);
}

G_DEFINE_AUTO_CLEANUP_CLEAR_FUNC(Calibration, calibration_clear)

static bool lines_of(const char *word, RfReticleLines *kind, GError **error)
{
    if (!word || g_str_equal(word, "grid"))
        *kind = RF_RETICLE_GRID;
    else if (g_str_equal(word, "horizontal"))
        *kind = RF_RETICLE_HORIZONTAL;
    else if (g_str_equal(word, "vertical"))
        *kind = RF_RETICLE_VERTICAL;
    else {
        g_set_error(error, RF_COMMAND_ERROR, RF_COMMAND_ERROR_USAGE,
                    "--lines=%s: grid, horizontal or vertical is needed", word);
        return false;
    }
    return true;
}

static bool measure_picture(const RfPicture *picture, const RfLengthScaleOptions *options, const char *name,
                            Calibration *calibration, GError **error)
{
    calibration->width = picture->width;
    calibration->height = picture->height;
    calibration->source = g_strdup(name);
    calibration->grey = rf_view_grey(picture);
    calibration->scale = rf_length_scale_measure(picture, options, error);
    if (!calibration->scale) g_prefix_error(error, "%s: ", name);
    return calibration->scale != NULL;
}

static bool measure_still(const char *path, const RfLengthScaleOptions *given, Calibration *calibration,
                          GError **error)
{
    g_autoptr(RfStill) still = rf_video_file_read_still(path, error);
    if (!still) return false;
    RfLengthScaleOptions options = *given;
    options.pixel_aspect = still->pixel_aspect;
    RfPicture picture = rf_ruler_still(still);
    return measure_picture(&picture, &options, path, calibration, error);
}

static bool measure_image(const char *path, Calibration *calibration, GError **error)
{
    RfLengthScaleOptions options = {.plane_ratio = {1, 0}, .pixel_aspect = 1};
    g_autoptr(GError) reason = NULL;
    if (!lines_of(lines, &options.lines, error)) return false;
    if (!rf_quantity_parse(spacing, "m", &options.spacing_m, &reason)) {
        g_set_error(error, RF_COMMAND_ERROR, RF_COMMAND_ERROR_USAGE, "--spacing: %s", reason->message);
        return false;
    }
    if (!(options.spacing_m.value > 0)) {
        g_set_error(error, RF_COMMAND_ERROR, RF_COMMAND_ERROR_USAGE,
                    "--spacing=%s: a length above zero is needed", spacing);
        return false;
    }
    return measure_still(path, &options, calibration, error);
}

static bool measure_recording(const RfSettings *settings, const RfLengthScaleOptions *given,
                              Calibration *calibration, GError **error)
{
    g_autoptr(RfVideoFile) video = rf_watch_open(settings, error);
    g_autoptr(RfSpotFinder) finder = video ? rf_watch_learn(video, rf_command_common()->threads, error) : NULL;
    if (!finder) return false;
    const RfBackground *background = rf_spot_finder_background(finder);
    RfLengthScaleOptions options = *given;
    options.pixel_aspect = background->pixel_aspect;
    RfPicture picture = rf_ruler_background(background);
    return measure_picture(&picture, &options, rf_ruler_source(settings), calibration, error);
}

static bool measure_sheet(const char *path, Calibration *calibration, GError **error)
{
    g_autoptr(RfSettings) settings = rf_settings_load(path, error);
    if (!settings) return false;
    RfLengthScaleOptions options = {settings->lines, settings->spacing_m, 1, settings->plane_ratio};
    return settings->reticle_image ? measure_still(settings->reticle_image, &options, calibration, error)
                                   : measure_recording(settings, &options, calibration, error);
}

static void print_line(const char *label, RfValue value, const char *unit)
{
    g_autofree char *text = rf_text_number_concise(value);
    printf("  %-12s %s %s\n", label, text, unit);
}

static void print_scale(const RfLengthScale *scale)
{
    RfValue x = {scale->px_per_m_x.value / 1e3, scale->px_per_m_x.sigma / 1e3};
    RfValue y = {scale->px_per_m_y.value / 1e3, scale->px_per_m_y.sigma / 1e3};
    RfValue rotation = {scale->rotation_rad.value * 180 / G_PI, scale->rotation_rad.sigma * 180 / G_PI};
    printf("%u lines found, each within %.3f px (rms)\n", scale->lines_found, scale->residual_px);
    print_line("across", x, "px/mm");
    print_line("down", y, "px/mm");
    print_line("rotation", rotation, "degrees");
    if (scale->squareness.sigma > 0)
        print_line("squareness", scale->squareness, "(down over across; 1 for square pixels)");
    if (scale->k1.sigma > 0)
        print_line("distortion", scale->k1, scale->uses_k1 ? "(k1, corrected)" : "(k1, not significant)");
}

static void print_json(const RfLengthScale *scale, const char *source)
{
    g_autoptr(RfResults) results = rf_results_new();
    rf_ruler_describe(scale, source, &results->scale);
    g_autofree char *json = rf_write_json_scale(results);
    fputs(json, stdout);
}

static void tell(const Calibration *calibration)
{
    if (rf_command_common()->as_json)
        print_json(calibration->scale, calibration->source);
    else if (!rf_command_common()->is_quiet)
        print_scale(calibration->scale);
}

static bool save_picture(const Calibration *calibration, GError **error)
{
    if (!picture_path) return true;
    g_autoptr(GBytes) png = rf_view_lines_png(calibration->grey, calibration->width, calibration->height,
                                              calibration->scale, error);
    gsize length;
    const char *bytes = png ? g_bytes_get_data(png, &length) : NULL;
    return bytes && g_file_set_contents(picture_path, bytes, (gssize)length, error);
}

static RfExit run(char **arguments, GError **error)
{
    const char *what;
    if (!rf_command_one_argument(arguments, "a run sheet, or an image with --spacing", &what, error))
        return RF_EXIT_USAGE;
    g_auto(Calibration) calibration = {0};
    bool is_measured =
        spacing ? measure_image(what, &calibration, error) : measure_sheet(what, &calibration, error);
    if (!is_measured || !save_picture(&calibration, error)) return RF_EXIT_INPUT;
    tell(&calibration);
    return RF_EXIT_DONE;
}

const RfCommand rf_command_calibrate = {
    .verb = "calibrate",
    .arguments = "SHEET|IMAGE",
    .purpose = "scale from the reticle, with a picture of the lines found",
    .details = "Finds the ruled lines in the still that the sheet names, or in the recording's own "
               "fixed background, or in an image given with --spacing, and prints pixels per millimetre "
               "across and down with their uncertainties, the lines' rotation and what the lens "
               "distorts. --spacing is a length with its uncertainty, as in '0.1000(2) mm'.\n\n"
               "Look at the picture: a scale is right when every line it draws lies on a line, and none "
               "is missing. With --json the text of scale.json goes to standard output.",
    .example = "  risefall calibrate reticle.png --spacing '0.1000(2) mm' --picture lines.png\n"
               "prints pixels per millimetre; lines.png shows whether every line is a line",
    .entries = entries,
    .has_json = true,
    .run = run,
};
