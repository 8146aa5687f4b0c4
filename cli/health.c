#include "cli/health.h"

#include "cli/examine.h"

#include <math.h>

static void warn_of_file(RfResults *results, const RfWatch *watch)
{
    const RfVideoInfo *info = rf_video_file_info(watch->video);
    const RfVideoFaults *faults = &watch->faults;
    if (faults->damaged + faults->lost > 0)
        rf_results_warn(results, "damaged footage: %" G_GINT64_FORMAT " frames concealed, %" G_GINT64_FORMAT
                      " lost, the first at %.2f s",
             faults->damaged, faults->lost, fmax(0, faults->first_fault_s));
    if (info->missing_s > 0)
        rf_results_warn(results, "the recording was cut short: its header promises %.1f s more than there is", info->missing_s);
    int64_t repaired = info->times_missing + info->times_backwards + faults->missing + faults->backwards;
    if (repaired > 0)
        rf_results_warn(results, "%" G_GINT64_FORMAT " timestamps were missing or ran backwards and were put one mean interval after "
                      "the frame before; if that is wrong, state frame_rate=", repaired);
    if (info->gaps > 0)
        rf_results_warn(results, "%" G_GINT64_FORMAT " gaps in the timestamps: frames were dropped there", info->gaps);
    if (watch->repeated > 0)
        rf_results_warn(results, "%" G_GINT64_FORMAT " repeated pictures were not taken as new measurements", watch->repeated);
}

static void warn_of_picture(RfResults *results, const RfWatch *watch, const RfFollow *follow)
{
    const RfSpotFinderFindings *findings = rf_spot_finder_findings(watch->finder);
    if (findings->saturated_spot_share > 0.05)
        rf_results_warn(results, "%.0f %% of the spots are saturated: lower the exposure next time",
             100 * findings->saturated_spot_share);
    double scale = watch->coding_noise * fmax(1, fmax(follow->paths->noise.scale_x, follow->paths->noise.scale_y));
    if (scale > 1.5 && !rf_video_file_info(watch->video)->is_lossless)
        rf_results_warn(results, "compression scatters positions %.1f times more than the picture's noise does: record with less of it "
                      "next time (the stated uncertainties are widened)", scale);
}

/* Where the camera moves, a frame in which the fixed picture isn't found again has no place. */
static void warn_of_lost_frames(RfResults *results, const RfSightings *sightings)
{
    guint lost = 0, all = sightings->exposures->len;
    for (guint i = 0; i < all; i++)
        lost += (g_array_index(sightings->exposures, RfExposure, i).flags & RF_EXPOSURE_UNPOSED) != 0;
    if (lost > 0)
        rf_results_warn(results,
                        "the camera moves, and in %u of %u pictures the reticle was not found again: they were left out "
                        "(lines that run one way only can't hold a moving camera: fix the camera, or use crossed lines)",
                        lost, all);
}

static void warn_of_axis(RfResults *results, const RfGravityAxis *axis)
{
    if (axis->legs > 0 && !axis->is_found)
        rf_results_warn(results, "the axis of gravity could not be found from the motion; the sheet's direction was taken as it is");
    if (axis->tilt_rad.sigma > 0 && axis->tilt_p < 1e-3)
        rf_results_warn(results, "field and gravity are not parallel: tilt %.2f degrees (u = %.2f, p = %.1g)",
             axis->tilt_rad.value * 180 / G_PI, axis->tilt_rad.sigma * 180 / G_PI, axis->tilt_p);
}

static GArray *fitness_of(const GPtrArray *videos, const RfWatch *watch, const RfPaths *paths)
{
    RfFitnessFigures figures;
    rf_examine_watched(videos, watch, paths, &figures);
    return rf_fitness_judge(&figures);
}

void rf_health_describe(RfResults *results, const GPtrArray *videos, const RfWatch *watch,
                        const RfFollow *follow)
{
    const RfVideoInfo *info = rf_video_file_info(watch->video);
    results->width = info->width;
    results->height = info->height;
    results->pixel_aspect = info->pixel_aspect;
    results->frames = watch->faults.frames;
    results->duration_s = info->duration_s;
    results->recording_summary = rf_video_file_summary(watch->video);
    results->gravity_axis_deg = follow->frame.gravity_rad * 180 / G_PI;
    results->fitness = fitness_of(videos, watch, follow->paths);
    warn_of_file(results, watch);
    warn_of_picture(results, watch, follow);
    warn_of_lost_frames(results, watch->sightings);
    warn_of_axis(results, &follow->axis);
    if (follow->paths->cuts > 0)
        rf_results_warn(results, "%u times it could not be decided which droplet was which: the paths were cut there",
             follow->paths->cuts);
}
