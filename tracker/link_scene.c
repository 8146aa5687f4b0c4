#include "tracker/link_scene.h"

#include <math.h>

/* What is believed of droplets where there are too few spots to ask: slow oil droplets at some hundred pixels per
 * millimetre. Only the first step of a path hangs on it. */
enum { triples_most = 20000 };

static const double fallback_spread_px2_s = 8, fallback_speed_px_s = 60;

static void place_spot(RfLinkScene *scene, const RfExposure *exposure, int i)
{
    const RfSpot *spot = rf_link_scene_spot(scene, i);
    RfSight *sight = &scene->sights[i];
    double aspect = scene->sightings->pixel_aspect, x_px, y_px;
    rf_pose_to_reference(&exposure->pose, scene->sightings, (double)spot->x_px, (double)spot->y_px, &x_px,
                         &y_px);
    sight->at_px[0] = x_px * aspect;
    sight->at_px[1] = y_px;

    double c = cos(exposure->pose.angle_rad), s = sin(exposure->pose.angle_rad);
    double xx = pow((double)spot->u_x_px * aspect, 2), yy = pow((double)spot->u_y_px, 2);
    double xy = (double)spot->cov_xy_px2 * aspect;
    sight->variance_px2[0] = fmax(1e-8, c * c * xx + s * s * yy + 2 * c * s * xy);
    sight->variance_px2[1] = fmax(1e-8, s * s * xx + c * c * yy - 2 * c * s * xy);
    sight->log_peak = log(fmax(1e-3, fabs((double)spot->peak)));
}

static int compare_heights(const void *a, const void *b, void *sights)
{
    const RfSight *s = sights;
    double ya = s[*(const int *)a].at_px[1], yb = s[*(const int *)b].at_px[1];
    return ya < yb ? -1 : ya > yb ? 1 : *(const int *)a - *(const int *)b;
}

static bool is_sorted(const RfLinkScene *scene, const RfExposure *exposure)
{
    for (unsigned i = exposure->first_spot + 1; i < exposure->first_spot + exposure->spots; i++)
        if (scene->sights[i].at_px[1] < scene->sights[i - 1].at_px[1]) return false;
    return true;
}

static void place_spots(RfLinkScene *scene)
{
    unsigned n_spots = scene->sightings->spots->len, n = scene->sightings->exposures->len;
    scene->sights = g_new0(RfSight, n_spots + 1);
    scene->by_height = g_new0(int, n_spots + 1);
    scene->is_claimed = g_new0(bool, n_spots + 1);
    scene->is_usable = g_new0(bool, n + 1);
    for (unsigned e = 0; e < n; e++) {
        const RfExposure *exposure = rf_link_scene_exposure(scene, e);
        scene->is_usable[e] = !(exposure->flags & (RF_EXPOSURE_REPEATED | RF_EXPOSURE_UNPOSED));
        for (unsigned i = exposure->first_spot; i < exposure->first_spot + exposure->spots; i++) {
            scene->by_height[i] = (int)i;
            place_spot(scene, exposure, (int)i);
        }
        if (!is_sorted(scene, exposure)) /* a camera that rolls mixes neighbouring heights */
            g_qsort_with_data(&scene->by_height[exposure->first_spot], (int)exposure->spots, sizeof(int),
                              compare_heights, scene->sights);
    }
}

unsigned rf_link_scene_first_from(const RfLinkScene *scene, unsigned exposure, double height_px)
{
    const RfExposure *e = rf_link_scene_exposure(scene, exposure);
    unsigned low = e->first_spot, high = e->first_spot + e->spots;
    while (low < high) {
        unsigned middle = low + (high - low) / 2;
        if (scene->sights[scene->by_height[middle]].at_px[1] < height_px)
            low = middle + 1;
        else
            high = middle;
    }
    return low;
}

/* Nearest spot of an exposure within a radius; -1 if there is none. */
static int nearest_spot(const RfLinkScene *scene, unsigned exposure, const double at_px[2], double radius_px)
{
    const RfExposure *e = rf_link_scene_exposure(scene, exposure);
    double best = radius_px * radius_px;
    int nearest = -1;
    for (unsigned k = rf_link_scene_first_from(scene, exposure, at_px[1] - radius_px);
         k < e->first_spot + e->spots; k++) {
        const RfSight *sight = &scene->sights[scene->by_height[k]];
        double dx = sight->at_px[0] - at_px[0], dy = sight->at_px[1] - at_px[1];
        if (dy > radius_px) break;
        if (dx * dx + dy * dy < best) {
            best = dx * dx + dy * dy;
            nearest = scene->by_height[k];
        }
    }
    return nearest;
}

static int mutual_neighbour(const RfLinkScene *scene, unsigned from, int spot, unsigned to, double radius_px)
{
    int there = nearest_spot(scene, to, scene->sights[spot].at_px, radius_px);
    if (there < 0 || nearest_spot(scene, from, scene->sights[there].at_px, radius_px) != spot) return -1;
    return there;
}

/* What three exposures in a row say of one droplet. */
typedef struct {
    double velocity_px_s[2], bend_px2[2], variance_px2[2], dt_s;
} Triple;

static void collect_triples(const RfLinkScene *scene, unsigned middle, double radius_px, GArray *triples)
{
    const RfExposure *before = rf_link_scene_exposure(scene, middle - 1),
                     *now = rf_link_scene_exposure(scene, middle),
                     *after = rf_link_scene_exposure(scene, middle + 1);
    double dt_s = (after->time_s - before->time_s) / 2;
    if (dt_s <= 0 || fabs(now->time_s - before->time_s - dt_s) > 0.1 * dt_s) return;
    for (unsigned i = now->first_spot; i < now->first_spot + now->spots; i++) {
        int a = mutual_neighbour(scene, middle, (int)i, middle - 1, radius_px);
        int b = mutual_neighbour(scene, middle, (int)i, middle + 1, radius_px);
        if (a < 0 || b < 0) continue;
        Triple t = {.dt_s = dt_s};
        for (int k = 0; k < 2; k++) {
            const RfSight *p = &scene->sights[a], *q = &scene->sights[i], *r = &scene->sights[b];
            t.velocity_px_s[k] = (r->at_px[k] - p->at_px[k]) / (2 * dt_s);
            t.bend_px2[k] = pow(p->at_px[k] - 2 * q->at_px[k] + r->at_px[k], 2);
            t.variance_px2[k] = p->variance_px2[k] + 4 * q->variance_px2[k] + r->variance_px2[k];
        }
        g_array_append_val(triples, t);
    }
}

static int compare_doubles(const void *a, const void *b)
{
    double x = *(const double *)a, y = *(const double *)b;
    return (x > y) - (x < y);
}

static double median(double *values, size_t n)
{
    qsort(values, n, sizeof *values, compare_doubles);
    return n % 2 ? values[n / 2] : (values[n / 2 - 1] + values[n / 2]) / 2;
}

/* Three places in a row bend by 2 D dt twice and by the spots' errors: the median keeps wrong neighbours, reversals and
 * standing specks from ruling it. */
static void learn_spread(RfLinkScene *scene, const GArray *triples)
{
    g_autofree double *bends = g_new(double, 2 * triples->len);
    for (unsigned i = 0; i < triples->len; i++) {
        const Triple *t = &g_array_index(triples, Triple, i);
        for (int k = 0; k < 2; k++)
            bends[2 * i + (unsigned)k] = (t->bend_px2[k] / 0.4549 - t->variance_px2[k]) / (2 * t->dt_s);
    }
    double floor_px2_s = 1e-3 / scene->exposure_s;
    scene->model.noise.spread_px2_s = fmax(floor_px2_s, median(bends, 2 * triples->len));
}

static void learn_speeds(RfLinkScene *scene, const GArray *triples)
{
    double spread = scene->model.noise.spread_px2_s, sum[2] = {0, 0}, n = 1e-9;
    for (unsigned i = 0; i < triples->len; i++) {
        const Triple *t = &g_array_index(triples, Triple, i);
        double limit = 9 * 2 * spread * t->dt_s;
        if (t->bend_px2[0] > limit + 9 * t->variance_px2[0] ||
            t->bend_px2[1] > limit + 9 * t->variance_px2[1])
            continue;
        for (int k = 0; k < 2; k++) sum[k] += t->velocity_px_s[k] * t->velocity_px_s[k];
        n++;
    }
    for (int k = 0; k < 2; k++) scene->model.velocity_sd_px_s[k] = 1.3 * sqrt(sum[k] / n);
}

/* Brownian memory: after this long a velocity is believed to have wandered as far as diffusion blurs it. */
static const double memory_s = 2;

static void finish_model(RfLinkScene *scene)
{
    RfMotionModel *model = &scene->model;
    double least_px_s = sqrt(model->noise.spread_px2_s / scene->exposure_s) / 2;
    double fastest = fmax(model->velocity_sd_px_s[0], model->velocity_sd_px_s[1]);
    for (int k = 0; k < 2; k++) {
        double v = fmax(fmax(model->velocity_sd_px_s[k], 0.15 * fastest), least_px_s);
        if (scene->options.max_speed_px_s > 0) v = fmin(v, scene->options.max_speed_px_s / 2);
        model->velocity_sd_px_s[k] = v;
        model->response_sd_px_s[k] = rf_field_course_is_known(scene->field) ? 1.5 * v : 0;
    }
    model->noise.wander_px2_s3 = model->noise.spread_px2_s / (memory_s * memory_s);
    model->noise.response_px2_s3 = model->noise.wander_px2_s3;
    model->change_cost = rf_field_course_is_known(scene->field) ? 8 : 5.5;
}

static void learn_model(RfLinkScene *scene)
{
    unsigned n = scene->sightings->exposures->len;
    double spots = (double)scene->sightings->spots->len / fmax(1, n);
    double radius_px = 0.35 * sqrt(scene->area_px2 / fmax(1, spots));
    g_autoptr(GArray) triples = g_array_new(false, false, sizeof(Triple));
    unsigned stride = MAX(1, n / 400);
    for (unsigned e = 1; e + 1 < n && triples->len < triples_most; e += stride)
        if (scene->is_usable[e - 1] && scene->is_usable[e] && scene->is_usable[e + 1])
            collect_triples(scene, e, radius_px, triples);
    scene->model.noise.spread_px2_s = fallback_spread_px2_s;
    scene->model.velocity_sd_px_s[0] = scene->model.velocity_sd_px_s[1] = fallback_speed_px_s;
    if (triples->len >= 20) {
        learn_spread(scene, triples);
        learn_speeds(scene, triples);
    }
    finish_model(scene);
}

static void learn_clock(RfLinkScene *scene)
{
    unsigned n = scene->sightings->exposures->len;
    g_autofree double *steps_s = g_new(double, n + 1);
    unsigned steps = 0;
    double last_s = -1;
    for (unsigned e = 0; e < n; e++) {
        if (!scene->is_usable[e]) continue;
        double time_s = rf_link_scene_exposure(scene, e)->time_s;
        if (last_s >= 0) steps_s[steps++] = time_s - last_s;
        last_s = time_s;
    }
    scene->exposure_s = steps ? fmax(1e-4, median(steps_s, steps)) : 1.0 / 30;
}

static void learn_merging(RfLinkScene *scene)
{
    unsigned n = scene->sightings->spots->len, stride = MAX(1, n / 5000), m = 0;
    g_autofree double *widths_px = g_new(double, n / stride + 2);
    for (unsigned i = 0; i < n; i += stride)
        widths_px[m++] = (double)rf_link_scene_spot(scene, (int)i)->width_px;
    double width_px = m ? median(widths_px, m) * scene->sightings->pixel_aspect : 2;
    scene->merge_px =
        fmax(3, 3 * width_px); /* two equal Gaussian spots show one peak below 2 sigma, noise adds the rest */
}

RfLinkScene *rf_link_scene_new(const RfSightings *sightings, const RfFieldCourse *field,
                               const RfLinkerOptions *options)
{
    RfLinkScene *scene = g_new0(RfLinkScene, 1);
    scene->sightings = sightings;
    scene->field = field;
    scene->options = *options;
    scene->area_px2 = sightings->width * sightings->pixel_aspect * sightings->height;
    place_spots(scene);
    learn_clock(scene);
    learn_model(scene);
    learn_merging(scene);
    scene->newcomers_px2 = 0.5 / scene->area_px2;
    return scene;
}

void rf_link_scene_free(RfLinkScene *scene)
{
    if (!scene) return;
    g_free(scene->sights);
    g_free(scene->by_height);
    g_free(scene->is_usable);
    g_free(scene->is_claimed);
    g_free(scene);
}
