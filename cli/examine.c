#include "cli/examine.h"

#include <glib/gstdio.h>
#include <math.h>

#include "cli/examine_combing.h"
#include "cli/examine_errors.h"
#include "tracker/linker.h"

/* ---- the file ---- */

static double bits_per_pixel(const GPtrArray *videos, const RfVideoInfo *info)
{
    const double pixels = (double)info->width * info->height * (double)info->frames;
    double bytes = 0;
    for (guint i = 0; i < videos->len; i++) {
        GStatBuf about;
        if (g_stat(g_ptr_array_index(videos, i), &about) != 0) return 0;
        bytes += (double)about.st_size;
    }
    return pixels > 0 ? 8 * bytes / pixels : 0;
}

static void describe_file(const GPtrArray *videos, const RfVideoInfo *info, RfFitnessFigures *figures)
{
    *figures = (RfFitnessFigures){
        .width_px = info->width,
        .height_px = info->height,
        .bit_depth = info->bit_depth,
        .pixel_aspect = info->pixel_aspect,
        .is_limited_range = info->is_limited_range,
        .is_interlaced = info->is_interlaced,
        .is_lossless = info->is_lossless,
        .bits_per_pixel = bits_per_pixel(videos, info),
        .frame_rate_hz = info->frame_rate_hz,
        .is_rate_constant = info->is_rate_constant,
        .tick_s = info->tick_s,
        .duration_s = info->duration_s,
        .frames = info->frames,
        .times_missing = info->times_missing,
        .times_backwards = info->times_backwards,
        .gaps = info->gaps,
    };
    g_strlcpy(figures->codec, info->codec, sizeof figures->codec);
    g_strlcpy(figures->container, info->container, sizeof figures->container);
}

/* The middle of a long recording: its ends are where hands are on the bench. */
static void choose_part(const RfVideoInfo *info, bool is_whole, RfSettings *settings)
{
    const double longest_s = RF_EXAMINE_FRAMES / info->frame_rate_hz;
    if (is_whole || info->duration_s <= longest_s * 1.01) return;
    const double start_s = 0.5 * (info->duration_s - longest_s);
    settings->start_s = (RfMaybeValue){true, {start_s, 0}};
    settings->stop_s = (RfMaybeValue){true, {start_s + longest_s, 0}};
}

/* ---- light and camera ---- */

static double black_clipped_share(const RfBackground *background, bool is_limited_range)
{
    const size_t n = (size_t)background->width * (size_t)background->height;
    const double floor = is_limited_range ? 16 << (background->bit_depth - 8) : 0;
    size_t at_floor = 0;
    for (size_t i = 0; i < n; i++) at_floor += (double)background->level[i] <= floor;
    return (double)at_floor / (double)n;
}

static void describe_light(const RfWatch *watch, RfFitnessFigures *figures)
{
    const RfSpotFinderFindings *findings = rf_spot_finder_findings(watch->finder);
    figures->mean_level = findings->mean_level;
    figures->noise_sd = findings->noise_sd;
    figures->noise_correlation = findings->noise_correlation;
    figures->flicker_relative_sd = findings->gain_sd;
    figures->black_clipped_share =
        black_clipped_share(rf_spot_finder_background(watch->finder), figures->is_limited_range);
}

static void describe_camera(const RfSightings *sightings, RfFitnessFigures *figures)
{
    const GArray *exposures = sightings->exposures;
    double x = 0, y = 0, angle = 0, square = 0, longest = 0, angle_square = 0;
    unsigned unposed = 0;
    for (guint i = 0; i < exposures->len; i++) {
        const RfExposure *exposure = &g_array_index(exposures, RfExposure, i);
        unposed += (exposure->flags & RF_EXPOSURE_UNPOSED) != 0;
        x += exposure->pose.shift_x_px / exposures->len;
        y += exposure->pose.shift_y_px / exposures->len;
        angle += exposure->pose.angle_rad / exposures->len;
    }
    for (guint i = 0; i < exposures->len; i++) {
        const RfPose *pose = &g_array_index(exposures, RfExposure, i).pose;
        const double off = hypot(pose->shift_x_px - x, pose->shift_y_px - y);
        square += off * off / exposures->len;
        longest = fmax(longest, off);
        angle_square += pow(pose->angle_rad - angle, 2) / exposures->len;
    }
    figures->movement_rms_px = sqrt(square);
    figures->movement_longest_px = longest;
    figures->rotation_rms_deg = sqrt(angle_square) * 180 / G_PI;
    figures->unposed_share = exposures->len ? (double)unposed / exposures->len : 0;
}

static void describe_part(const RfWatch *watch, RfFitnessFigures *figures)
{
    const GArray *exposures = watch->sightings->exposures;
    figures->part_frames = watch->faults.frames;
    figures->part_exposures = exposures->len;
    figures->frames_damaged = watch->faults.damaged;
    figures->frames_lost = watch->faults.lost;
    figures->exposures_repeated = watch->repeated;
    figures->times_missing += watch->faults.missing;
    figures->times_backwards += watch->faults.backwards;
    figures->interval_shortest_s = figures->interval_longest_s = 0;
    for (guint i = 1; i < exposures->len; i++) {
        const double interval_s = g_array_index(exposures, RfExposure, i).time_s -
                                  g_array_index(exposures, RfExposure, i - 1).time_s;
        figures->interval_shortest_s = i == 1 ? interval_s : fmin(figures->interval_shortest_s, interval_s);
        figures->interval_longest_s = fmax(figures->interval_longest_s, interval_s);
    }
    if (exposures->len == 0) return;
    figures->part_start_s = g_array_index(exposures, RfExposure, 0).time_s;
    figures->part_stop_s = g_array_index(exposures, RfExposure, exposures->len - 1).time_s;
}

/* ---- droplets ---- */

static int ascending(gconstpointer a, gconstpointer b)
{
    const float x = *(const float *)a, y = *(const float *)b;
    return (x > y) - (x < y);
}

static void describe_droplets(const RfWatch *watch, const RfPaths *paths, RfFitnessFigures *figures)
{
    g_autoptr(GArray) snr = g_array_new(FALSE, FALSE, sizeof(float)),
                      width = g_array_new(FALSE, FALSE, sizeof(float));
    unsigned saturated = 0;
    for (guint i = 0; i < paths->paths->len; i++) {
        const GArray *points = ((const RfPath *)g_ptr_array_index(paths->paths, i))->points;
        for (guint k = 0; k < points->len; k++) {
            const int number = g_array_index(points, RfPathPoint, k).spot;
            if (number < 0) continue;
            const RfSpot *spot = &g_array_index(watch->sightings->spots, RfSpot, number);
            saturated += (spot->flags & RF_SPOT_SATURATED) != 0;
            g_array_append_val(snr, spot->snr);
            g_array_append_val(width, spot->width_px);
        }
    }
    figures->droplets = paths->paths->len;
    if (snr->len == 0) return;
    g_array_sort(snr, ascending);
    g_array_sort(width, ascending);
    figures->snr_median = (double)g_array_index(snr, float, snr->len / 2);
    figures->snr_lower_quartile = (double)g_array_index(snr, float, snr->len / 4);
    figures->spot_width_px = (double)g_array_index(width, float, width->len / 2);
    figures->saturated_share = (double)saturated / snr->len;
    figures->followed_mean_s = (double)snr->len / paths->paths->len *
                               (figures->part_stop_s - figures->part_start_s) /
                               (double)MAX(1, figures->part_exposures);
    figures->droplets_per_exposure = (double)snr->len / (double)MAX(1, figures->part_exposures);
}

/* ---- all of it ---- */

static void describe_sightings(const RfWatch *watch, const RfPaths *paths, RfFitnessFigures *figures)
{
    describe_part(watch, figures);
    describe_light(watch, figures);
    describe_camera(watch->sightings, figures);
    describe_droplets(watch, paths, figures);
    rf_examine_errors(watch, paths, figures);
}

void rf_examine_watched(const GPtrArray *videos, const RfWatch *watch, const RfPaths *paths,
                        RfFitnessFigures *figures)
{
    describe_file(videos, rf_video_file_info(watch->video), figures);
    describe_sightings(watch, paths, figures);
    figures->is_combing_untested = true;
}

static bool examine_part(const RfSettings *settings, const RfWatchHooks *hooks, RfFitnessFigures *figures,
                         GError **error)
{
    g_autoptr(RfWatch) watch = rf_watch_recording(settings, hooks, error);
    g_autoptr(RfPaths) paths = watch ? rf_linker_run(watch->sightings, NULL, NULL, error) : NULL;
    if (!paths) return false;
    describe_sightings(watch, paths, figures);
    return figures->is_interlaced || rf_examine_combing(watch, paths, &figures->combing, error);
}

bool rf_examine_recording(const char *path, bool is_whole, const RfWatchHooks *hooks,
                          RfFitnessFigures *figures, GError **error)
{
    g_autoptr(GPtrArray) videos = g_ptr_array_new();
    g_ptr_array_add(videos, (char *)path);
    RfSettings settings = {.videos = videos};
    g_autoptr(RfVideoFile) video = rf_watch_open(&settings, error);
    if (!video) return false;
    const RfVideoInfo *info = rf_video_file_info(video);
    describe_file(videos, info, figures);
    choose_part(info, is_whole, &settings);
    return examine_part(&settings, hooks, figures, error);
}
