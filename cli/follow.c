#include "cli/follow.h"

#include "cli/results.h"
#include "cli/trails.h"
#include "tracker/linker.h"

#include <math.h>

/* ---- rows: one path point after another in millimetres ---- */

static RfPixel to_reference(const RfSightings *sightings, const RfExposure *exposure, double x_px, double y_px)
{
    RfPixel at;
    rf_pose_to_reference(&exposure->pose, sightings, x_px, y_px, &at.x, &at.y);
    return at;
}

static RfPathRow row_of(const RfPath *path, const RfPathPoint *point, const RfSightings *sightings,
                        const RfPictureFrame *frame)
{
    const RfExposure *exposure = &g_array_index(sightings->exposures, RfExposure, point->exposure);
    RfPixel at = to_reference(sightings, exposure, point->x_px, point->y_px);
    RfMetre place = rf_picture_frame_to_cell(frame, at);
    RfMetre sigma = rf_picture_frame_sigma_m(frame, at, (RfPixel){point->u_x_px, point->u_y_px});
    return (RfPathRow){
        .droplet = path->droplet,
        .frame = exposure->frame,
        .field = exposure->field,
        .seen = point->is_seen,
        .time_s = exposure->time_s,
        .x_px = point->x_px,
        .y_px = point->y_px,
        .u_x_px = point->u_x_px,
        .u_y_px = point->u_y_px,
        .x_mm = place.x * 1e3,
        .y_mm = place.y * 1e3,
        .u_x_mm = sigma.x * 1e3,
        .u_y_mm = sigma.y * 1e3,
        .smooth_x_px = point->smooth_x_px,
        .smooth_y_px = point->smooth_y_px,
        .u_smooth_x_px = point->u_smooth_x_px,
        .u_smooth_y_px = point->u_smooth_y_px,
        .snr = point->spot >= 0 ? (double)g_array_index(sightings->spots, RfSpot, point->spot).snr : 0,
    };
}

static guint count_points(const RfPaths *paths)
{
    guint n = 0;
    for (guint i = 0; i < paths->paths->len; i++) n += ((const RfPath *)g_ptr_array_index(paths->paths, i))->points->len;
    return n;
}

static GArray *rows_of(const RfPaths *paths, const RfSightings *sightings, const RfPictureFrame *frame)
{
    GArray *rows = g_array_sized_new(FALSE, FALSE, sizeof(RfPathRow), count_points(paths));
    for (guint i = 0; i < paths->paths->len; i++) {
        const RfPath *path = g_ptr_array_index(paths->paths, i);
        for (guint k = 0; k < path->points->len; k++) {
            RfPathRow row = row_of(path, &g_array_index(path->points, RfPathPoint, k), sightings, frame);
            g_array_append_val(rows, row);
        }
    }
    return rows;
}

static RfTrailSet *trails_of(const RfPaths *paths, const RfSightings *sightings, const RfPictureFrame *frame)
{
    g_autoptr(GArray) rows = rows_of(paths, sightings, frame);
    return rf_trails_new(rows);
}

/* ---- the axis of gravity, from droplets' velocities between switches ---- */

enum { LEG_SAMPLES_MIN = 8 };

/* Mean velocity from end to end: efficient where Brownian motion rules. Trails are in an unturned frame here, so
 * that x and y are the picture's. */
static RfMotionLeg leg_between(const RfTrail *trail, size_t first, size_t last, double diffusion_m2_s)
{
    const RfSample *a = &trail->samples[first], *b = &trail->samples[last];
    double span_s = b->time_s - a->time_s;
    double noise_x = a->u_drift_m * a->u_drift_m + b->u_drift_m * b->u_drift_m;
    double noise_y = a->u_fall_m * a->u_fall_m + b->u_fall_m * b->u_fall_m;
    return (RfMotionLeg){
        .droplet = trail->droplet,
        .vx = (b->drift_m - a->drift_m) / span_s,
        .vy = (b->fall_m - a->fall_m) / span_s,
        .var_x = 2 * diffusion_m2_s / span_s + noise_x / (span_s * span_s),
        .var_y = 2 * diffusion_m2_s / span_s + noise_y / (span_s * span_s),
    };
}

static void add_legs_of(GArray *legs, const RfTrail *trail, double diffusion_m2_s, const RfFieldTimeline *timeline)
{
    size_t first = 0;
    for (guint k = 0; k < timeline->intervals->len; k++) {
        const RfFieldInterval *interval = &g_array_index(timeline->intervals, RfFieldInterval, k);
        while (first < trail->n && trail->samples[first].time_s < interval->start_s)
            first++;
        size_t end = first;
        while (end < trail->n && trail->samples[end].time_s < interval->end_s)
            end++;
        if (end - first < LEG_SAMPLES_MIN)
            continue;
        RfMotionLeg leg = leg_between(trail, first, end - 1, diffusion_m2_s);
        leg.interval = k;
        leg.is_off = interval->state == RF_FIELD_OFF;
        leg.state = (int)interval->state;
        g_array_append_val(legs, leg);
    }
}

static GArray *legs_of(const RfTrailSet *trails, const RfPaths *paths, const RfLengthScale *scale,
                       const RfFieldTimeline *timeline)
{
    GArray *legs = g_array_new(FALSE, FALSE, sizeof(RfMotionLeg));
    double m_per_px = 1 / scale->px_per_m_y.value; /* square pixels have the height of a stored one */
    for (size_t i = 0; i < trails->n; i++) {
        const RfPath *path = g_ptr_array_index(paths->paths, i);
        add_legs_of(legs, &trails->trails[i], path->diffusion_px2_s * m_per_px * m_per_px, timeline);
    }
    return legs;
}

static RfPictureFrame unturned_frame(const RfSightings *sightings, const RfLengthScale *scale)
{
    return (RfPictureFrame){
        .width = sightings->width,
        .height = sightings->height,
        .pixel_aspect = sightings->pixel_aspect,
        .px_per_m_x = scale->px_per_m_x.value,
        .px_per_m_y = scale->px_per_m_y.value,
        .k1 = scale->uses_k1 ? scale->k1.value : 0,
    };
}

static RfGravityAxis axis_of(const GArray *legs, const RfSettings *settings)
{
    const RfMotionLeg *data = (const RfMotionLeg *)(const void *)legs->data;
    if (settings->finds_gravity)
        return rf_gravity_axis_find(data, legs->len);
    return rf_gravity_axis_refine(data, legs->len, rf_picture_frame_direction_rad(settings->gravity));
}

/* Which way to look for switches before the axis is known: the sheet's word, or the way most of the motion goes. */
static double first_guess_rad(const RfTrailSet *trails, const RfSettings *settings)
{
    if (!settings->finds_gravity)
        return rf_picture_frame_direction_rad(settings->gravity);
    double xx = 0, xy = 0, yy = 0;
    for (size_t i = 0; i < trails->n; i++) {
        const RfTrail *trail = &trails->trails[i];
        if (trail->n < LEG_SAMPLES_MIN)
            continue;
        double dx = trail->samples[trail->n - 1].drift_m - trail->samples[0].drift_m;
        double dy = trail->samples[trail->n - 1].fall_m - trail->samples[0].fall_m;
        xx += dx * dx;
        xy += dx * dy;
        yy += dy * dy;
    }
    return 0.5 * atan2(-2 * xy, yy - xx); /* principal axis, from +y towards -x */
}

/* ---- the two passes ---- */

static GArray *course_of(const RfFieldTimeline *timeline)
{
    GArray *changes = g_array_new(FALSE, FALSE, sizeof(RfFieldChange));
    for (guint i = 0; i < timeline->intervals->len; i++) {
        const RfFieldInterval *interval = &g_array_index(timeline->intervals, RfFieldInterval, i);
        RfFieldChange change = {interval->start_s, interval->state == RF_FIELD_OFF         ? 0
                                                   : interval->state == RF_FIELD_TOP_PLUS ? 1
                                                                                           : -1};
        g_array_append_val(changes, change);
    }
    return changes;
}

static RfFieldTimeline *timeline_in(const RfFollow *follow, const RfSightings *sightings, const RfFieldSheet *sheet,
                                    GError **error)
{
    g_autoptr(RfTrailSet) trails = trails_of(follow->paths, sightings, &follow->frame);
    return rf_field_timeline_find(trails->trails, trails->n, sheet, error);
}

/* Switches and axis help each other: switches along the guessed axis, the axis from the legs between switches. */
static RfFieldTimeline *read_field_and_axis(RfFollow *follow, const RfSightings *sightings, const RfLengthScale *scale,
                                            const RfSettings *settings, const RfFieldSheet *sheet, GError **error)
{
    follow->frame = unturned_frame(sightings, scale);
    g_autoptr(RfTrailSet) trails = trails_of(follow->paths, sightings, &follow->frame);
    follow->frame.gravity_rad = first_guess_rad(trails, settings);
    g_autoptr(RfFieldTimeline) timeline = timeline_in(follow, sightings, sheet, error);
    if (!timeline)
        return NULL;
    g_autoptr(GArray) legs = legs_of(trails, follow->paths, scale, timeline);
    follow->axis = axis_of(legs, settings);
    follow->frame.gravity_rad = follow->axis.gravity_rad.value;
    return g_steal_pointer(&timeline);
}

static bool link_again(RfFollow *follow, const RfSightings *sightings, const RfFieldTimeline *timeline, GError **error)
{
    g_autoptr(GArray) changes = course_of(timeline);
    RfFieldCourse course = {(const RfFieldChange *)(const void *)changes->data, changes->len};
    rf_paths_free(follow->paths);
    follow->paths = rf_linker_run(sightings, &course, NULL, error);
    return follow->paths != NULL;
}

RfFollow *rf_follow_droplets(const RfSightings *sightings, const RfLengthScale *scale, const RfSettings *settings,
                             const RfFieldSheet *sheet, GError **error)
{
    g_autoptr(RfFollow) follow = g_new0(RfFollow, 1);
    follow->paths = rf_linker_run(sightings, NULL, NULL, error);
    if (!follow->paths)
        return NULL;
    if (follow->paths->paths->len > 0) {
        g_autoptr(RfFieldTimeline) timeline =
            read_field_and_axis(follow, sightings, scale, settings, sheet, error);
        if (!timeline || !link_again(follow, sightings, timeline, error))
            return NULL;
    }
    follow->rows = rows_of(follow->paths, sightings, &follow->frame);
    return g_steal_pointer(&follow);
}

void rf_follow_free(RfFollow *follow)
{
    if (!follow)
        return;
    rf_paths_free(follow->paths);
    if (follow->rows)
        g_array_unref(follow->rows);
    g_free(follow);
}
