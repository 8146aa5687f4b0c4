#include "cli/examine_errors.h"

#include <math.h>

/* ---- errors beside diffusion ---- */

/* With position errors of correlation rho^k between exposures k apart, increments have the covariances
 * c1 = 2 R D dt - s^2 (1 - rho)^2 and c2 = -s^2 rho (1 - rho)^2; 2 D dt is c0 + 2 (c1 + c2 + c3) up to rho^4. A covariance
 * of n increments has a standard error of about c0/sqrt(n). Where diffusion outweighs the errors (c1 not clearly
 * negative), neither s nor rho can be told without knowing the droplets' size. */
typedef struct {
    bool is_told;
    double first_px2, second_px2, u_px2; /* c1 less its part of diffusion, c2, the standard error of either */
    int axis;
} Errors;

static Errors errors_beside_diffusion(const RfPathErrors *noise)
{
    enum { LEAST = 100 };
    /* Reversals that nobody has told of look like lasting covariance: the axis with less of it is across gravity. */
    const int axis = fabs(noise->lag_px2[0][3]) < fabs(noise->lag_px2[1][3]) ? 0 : 1;
    const double *c_px2 = noise->lag_px2[axis];
    const double u_px2 = c_px2[0] / sqrt(fmax(1, noise->increments));
    const double spread_px2 = fmax(0, c_px2[0] + 2 * (c_px2[1] + c_px2[2] + c_px2[3]));
    return (Errors){noise->increments >= LEAST && c_px2[1] < -5 * u_px2, c_px2[1] - noise->blur * spread_px2,
                    c_px2[2], u_px2, axis};
}

static RfValue error_correlation(const Errors *errors)
{
    if (!errors->is_told) return (RfValue){0, 0};
    const double rho = errors->second_px2 / errors->first_px2;
    return (RfValue){CLAMP(rho, -1, 1), errors->u_px2 / -errors->first_px2 * sqrt(1 + rho * rho)};
}

static double stated_variance_px2(const RfWatch *watch, const RfPaths *paths, int axis)
{
    double sum = 0, n = 0;
    for (guint i = 0; i < paths->paths->len; i++) {
        const GArray *points = ((const RfPath *)g_ptr_array_index(paths->paths, i))->points;
        for (guint k = 0; k < points->len; k++) {
            const int number = g_array_index(points, RfPathPoint, k).spot;
            if (number < 0) continue;
            const RfSpot *spot = &g_array_index(watch->sightings->spots, RfSpot, number);
            const double u_px = (double)(axis == 0 ? spot->u_x_px : spot->u_y_px);
            sum += u_px * u_px;
            n++;
        }
    }
    return sum / fmax(1, n);
}

static RfValue excess_scatter(const Errors *errors, double stated_px2)
{
    if (!errors->is_told || !(stated_px2 > 0)) return (RfValue){0, 0};
    const double excess = sqrt(-errors->first_px2 / stated_px2);
    return (RfValue){excess, 0.5 * excess * errors->u_px2 / -errors->first_px2};
}

/* ---- along the paths ---- */

typedef struct {
    const RfWatch *watch;
    GHashTable *keyframes; /* of frame indices */
    GArray *jumps;         /* of double */
    unsigned steps, standstills;
} Walk;

static const RfPathPoint *point_at(const RfPath *path, guint i)
{
    return &g_array_index(path->points, RfPathPoint, i);
}

static const RfExposure *exposure_of(const Walk *walk, const RfPathPoint *point)
{
    return &g_array_index(walk->watch->sightings->exposures, RfExposure, point->exposure);
}

/* In the reference picture: a camera that moves is no leap. */
static RfPixel place_of(const Walk *walk, const RfPathPoint *point)
{
    RfPixel place;
    rf_pose_to_reference(&exposure_of(walk, point)->pose, walk->watch->sightings, point->x_px, point->y_px,
                         &place.x, &place.y);
    return place;
}

/* An encoder that saves bits copies the blocks of the picture before: the droplet then stands where it stood, and so
 * does the noise around it. Nothing else makes two independent measurements equal to a thousandth of a pixel. */
static void count_standstill(Walk *walk, const RfPathPoint *a, const RfPathPoint *b)
{
    static const double SAME_PX = 1e-3;
    if (!a->is_seen || !b->is_seen || exposure_of(walk, b)->flags & RF_EXPOSURE_REPEATED) return;
    walk->steps++;
    walk->standstills += fabs(b->x_px - a->x_px) < SAME_PX && fabs(b->y_px - a->y_px) < SAME_PX;
}

/* A picture that is coded by itself can't lag behind the motion: where the pictures before it did, the droplet leaps
 * onwards. The velocity is taken from points that have no part in the leap. */
static void measure_jump(Walk *walk, const RfPath *path, guint i)
{
    enum { BACK = 20 };
    static const double MOVED_PX = 3;
    if (i < BACK + 2) return;
    const RfPathPoint *at = point_at(path, i), *before = point_at(path, i - 1);
    const RfPathPoint *late = point_at(path, i - 2), *early = point_at(path, i - 2 - BACK);
    if (!at->is_seen || !before->is_seen || !late->is_seen || !early->is_seen) return;
    const RfPixel from = place_of(walk, early), to = place_of(walk, late);
    const double dx = to.x - from.x, dy = to.y - from.y, way = hypot(dx, dy);
    if (way < MOVED_PX) return;
    const RfPixel last = place_of(walk, before), now = place_of(walk, at);
    const double jump = ((now.x - last.x) * dx + (now.y - last.y) * dy) / way - way / BACK;
    g_array_append_val(walk->jumps, jump);
}

static void walk_along(Walk *walk, const RfPath *path)
{
    for (guint i = 1; i < path->points->len; i++) {
        const RfPathPoint *point = point_at(path, i);
        const RfExposure *exposure = exposure_of(walk, point);
        count_standstill(walk, point_at(path, i - 1), point);
        if (exposure->field == 0 && g_hash_table_contains(walk->keyframes, &exposure->frame))
            measure_jump(walk, path, i);
    }
}

static int ascending(gconstpointer a, gconstpointer b)
{
    const double x = *(const double *)a, y = *(const double *)b;
    return (x > y) - (x < y);
}

/* Mean of the middle four fifths, so that a reversal at a keyframe doesn't matter; its standard error from their
 * spread. */
static RfValue middle_mean(GArray *values)
{
    enum { LEAST = 20 };
    if (values->len < LEAST) return (RfValue){0, 0};
    g_array_sort(values, ascending);
    const guint from = values->len / 10, to = values->len - from, n = to - from;
    double mean = 0, square = 0;
    for (guint i = from; i < to; i++) mean += g_array_index(values, double, i) / n;
    for (guint i = from; i < to; i++) square += pow(g_array_index(values, double, i) - mean, 2);
    /* winsorised at the outermost value kept (Tukey and McLaughlin 1963) */
    square += from * (pow(g_array_index(values, double, from) - mean, 2) +
                      pow(g_array_index(values, double, to - 1) - mean, 2));
    return (RfValue){mean, sqrt(square / (values->len - 1.0) * values->len) / n};
}

static GHashTable *keyframes_of(const RfVideoFile *video)
{
    GHashTable *keyframes = g_hash_table_new_full(g_int64_hash, g_int64_equal, g_free, NULL);
    const int n = rf_video_file_keyframes(video);
    if (n == rf_video_file_info(video)->frames_used) return keyframes; /* every picture is coded by itself */
    for (int i = 0; i < n; i++) {
        const int64_t frame = rf_video_file_keyframe(video, i);
        g_hash_table_add(keyframes, g_memdup2(&frame, sizeof frame));
    }
    return keyframes;
}

void rf_examine_errors(const RfWatch *watch, const RfPaths *paths, RfFitnessFigures *figures)
{
    const Errors errors = errors_beside_diffusion(&paths->noise);
    figures->excess_scatter = excess_scatter(&errors, stated_variance_px2(watch, paths, errors.axis));
    figures->error_correlation = error_correlation(&errors);
    g_autoptr(GHashTable) keyframes = keyframes_of(watch->video);
    g_autoptr(GArray) jumps = g_array_new(FALSE, FALSE, sizeof(double));
    Walk walk = {.watch = watch, .keyframes = keyframes, .jumps = jumps};
    for (guint i = 0; i < paths->paths->len; i++) walk_along(&walk, g_ptr_array_index(paths->paths, i));
    figures->standstill_share = walk.steps ? (double)walk.standstills / walk.steps : 0;
    figures->keyframe_jump_px = middle_mean(jumps);
}
