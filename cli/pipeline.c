#include "cli/pipeline.h"

#include "cli/audit.h"
#include "cli/certificate.h"
#include "cli/common_inputs.h"
#include "cli/conditions.h"
#include "cli/digest.h"
#include "cli/follow.h"
#include "cli/health.h"
#include "cli/measure.h"
#include "cli/overrule.h"
#include "cli/read_paths.h"
#include "cli/review.h"
#include "cli/ruler.h"
#include "cli/view.h"
#include "cli/write_csv.h"

#include <math.h>

/* ---- what the report says of its inputs ---- */

static bool add_input(RfResults *results, const char *role, const char *path, GError **error)
{
    if (!path)
        return true;
    char *sha256 = rf_digest_file(path, error);
    if (!sha256)
        return false;
    RfInputFile input = {g_strdup(role), g_strdup(path), sha256};
    g_array_append_val(results->inputs, input);
    return true;
}

static bool add_inputs(RfResults *results, const RfSettings *settings, GError **error)
{
    if (!add_input(results, "run sheet", settings->path, error))
        return false;
    for (guint i = 0; i < settings->videos->len; i++)
        if (!add_input(results, "recording", g_ptr_array_index(settings->videos, i), error))
            return false;
    return add_input(results, "reticle", settings->reticle_image, error) &&
           add_input(results, "voltage log", settings->log, error) &&
           add_input(results, "hand timings", settings->timings, error) &&
           add_input(results, "review", settings->review, error);
}

static void add_settings(RfResults *results, const RfSettings *settings)
{
    results->sheet_path = g_strdup(settings->path);
    g_array_unref(results->settings);
    results->settings = g_array_ref(settings->used);
    g_array_unref(results->notes);
    results->notes = g_array_ref(settings->notes);
}

static RfResults *new_results(const RfSettings *settings, GError **error)
{
    g_autoptr(RfResults) results = rf_results_new();
    add_settings(results, settings);
    return add_inputs(results, settings, error) ? g_steal_pointer(&results) : NULL;
}

/* ---- from the recording to paths ---- */

static bool fits_the_recording(const RfSettings *settings, const RfVideoInfo *info, GError **error)
{
    if (!settings->reticle_image)
        return true;
    g_autoptr(RfStill) still = rf_video_file_read_still(settings->reticle_image, error);
    if (!still)
        return false;
    if (still->width == info->width && still->height == info->height)
        return true;
    g_set_error(error, RF_SETTINGS_ERROR, RF_SETTINGS_ERROR_VALUE,
                "%s: the still is %d x %d pixels, the recording %d x %d; both must be taken with the same camera settings",
                settings->reticle_image, still->width, still->height, info->width, info->height);
    return false;
}

/* The scale along gravity, which is what charges hang on. */
static double scale_relative_u(const RfLengthScale *scale, double gravity_rad)
{
    double along_y = scale->px_per_m_y.sigma / scale->px_per_m_y.value;
    double along_x = scale->px_per_m_x.sigma / scale->px_per_m_x.value;
    double c = cos(gravity_rad), s = sin(gravity_rad);
    return sqrt(c * c * along_y * along_y + s * s * along_x * along_x);
}

typedef struct {
    RfResults *results;
    RfSupply *supply;
    double scale_relative_u;
} Road;

static bool follow_recording(Road *road, const RfSettings *settings, const RfWatchHooks *hooks, GError **error)
{
    g_autoptr(RfWatch) watch = rf_watch_recording(settings, hooks, error);
    if (!watch || !fits_the_recording(settings, rf_video_file_info(watch->video), error))
        return false;
    const RfBackground *background = rf_spot_finder_background(watch->finder);
    g_autoptr(RfLengthScale) scale = rf_ruler_measure(settings, background, error);
    if (!scale)
        return false;
    g_autoptr(RfFollow) follow =
        rf_follow_droplets(watch->sightings, scale, settings, &road->supply->sheet, error);
    if (!follow)
        return false;
    RfResults *results = road->results;
    rf_ruler_describe(scale, rf_ruler_source(settings), &results->scale);
    rf_ruler_lines(scale, &follow->frame, &results->scale);
    road->scale_relative_u = scale_relative_u(scale, follow->frame.gravity_rad);
    results->scale.u_relative_along_gravity = road->scale_relative_u;
    g_array_unref(results->paths);
    results->paths = g_steal_pointer(&follow->rows);
    rf_write_csv_settle_paths(results->paths);
    rf_health_describe(results, settings->videos, watch, follow);
    results->view_png = rf_view_background_png(background);
    return true;
}

static bool set_out(Road *road, const RfSettings *settings, GError **error)
{
    road->results = new_results(settings, error);
    road->supply = road->results ? rf_measure_supply_new(settings, error) : NULL;
    /* A table that is none is said now, not after the work. */
    return road->supply != NULL && (!settings->timings || rf_audit_can_read(settings->timings, error)) &&
           (!settings->review || rf_review_read(settings->review, road->results, error));
}

/* A record that can't be audited is no reason to lose the run. */
static void audit(RfResults *results, const RfSettings *settings, const RfMedium *medium)
{
    g_autoptr(GError) error = NULL;
    if (settings->timings && !rf_audit_timings(settings->timings, results, medium, &error))
        g_ptr_array_add(results->warnings, g_strdup(error->message));
}

static bool measure(Road *road, const RfSettings *settings, const RfWatchHooks *hooks, GError **error)
{
    const RfChargeInputs inputs = rf_conditions_of(settings, road->scale_relative_u);
    rf_common_inputs_state(road->results, settings, &inputs);
    if (!rf_overrule_measure(road->results, &inputs, road->supply, hooks->threads, error) ||
        !rf_certificate_check(road->results, settings, &inputs, error))
        return false;
    road->results->air_temperature_kelvin = inputs.temperature_kelvin;
    const RfMedium medium = rf_charge_budget_medium(&inputs);
    audit(road->results, settings, &medium);
    return true;
}

static RfResults *arrive(Road *road, bool is_well)
{
    rf_measure_supply_free(road->supply);
    if (is_well)
        return road->results;
    rf_results_free(road->results);
    return NULL;
}

RfResults *rf_pipeline_run(const RfSettings *settings, const RfWatchHooks *hooks, GError **error)
{
    Road road = {0};
    return arrive(&road, set_out(&road, settings, error) && follow_recording(&road, settings, hooks, error) &&
                             measure(&road, settings, hooks, error));
}

RfResults *rf_pipeline_paths(const RfSettings *settings, const RfWatchHooks *hooks, GError **error)
{
    Road road = {0};
    if (!set_out(&road, settings, error) || !follow_recording(&road, settings, hooks, error))
        return arrive(&road, false);
    g_array_set_size(road.results->review, 0); /* paths as they were followed: charge honours the review */
    road.results->measured = road.results->paths->len > 0;
    road.results->verdict = g_strdup(road.results->measured ? "Paths only: nothing was measured from them."
                                                            : "Nothing could be measured: no droplet was seen.");
    return arrive(&road, true);
}

RfResults *rf_pipeline_charge(const RfSettings *settings, const char *paths_csv, const RfWatchHooks *hooks,
                              GError **error)
{
    Road road = {0};
    return arrive(&road, set_out(&road, settings, error) && add_input(road.results, "paths", paths_csv, error) &&
                             rf_read_paths(paths_csv, road.results, &road.scale_relative_u, error) &&
                             measure(&road, settings, hooks, error));
}
