#include "tracker/path_build.h"

#include <math.h>

#include "tracker/fill.h"
#include "tracker/path_noise.h"

enum { suspect_hits = 30 };

/* A path must leave a circle of so many of its spots' own uncertainties: noise that a codec repeats from frame to frame
 * wanders by a few. */
static const double least_extent_u = 8;
/* Steps shorter than this, in units of a droplet's Brownian step: one in a hundred of them. Where most are as short, it is
 * something that stands and now and then jumps (the rim of a speck, frozen noise) unless it gets far. */
static const double frozen_step = 0.15, frozen_extent_factor = 5;

static const double least_share = 0.6;     /* of the exposures that a suspect must be seen in */
static const double faint_snr = 3;         /* of the spot's peak; a suspect must be brighter */
static const double missed_log_odds = 1.2; /* -log of the chance that a droplet is missed, generously */

static const RfHit *hit(const RfChain *chain, unsigned i)
{
    return &g_array_index(chain->hits, RfHit, i);
}

static int compare_floats(const void *a, const void *b)
{
    float x = *(const float *)a, y = *(const float *)b;
    return (x > y) - (x < y);
}

static double median_snr(const RfLinkScene *scene, const RfChain *chain)
{
    unsigned n = chain->hits->len;
    g_autofree float *snr = g_new(float, n);
    for (unsigned i = 0; i < n; i++) snr[i] = rf_link_scene_spot(scene, hit(chain, i)->spot)->snr;
    qsort(snr, n, sizeof *snr, compare_floats);
    return (double)snr[n / 2];
}

static unsigned usable_exposures(const RfLinkScene *scene, const RfChain *chain)
{
    unsigned usable = 0;
    for (unsigned e = rf_chain_first(chain); e <= rf_chain_last(chain); e++) usable += scene->is_usable[e];
    return usable;
}

/* What strong compression leaves behind a droplet may move like one for a few exposures, but is rarely seen in most; what
 * a moving camera leaves of a speck is hardly brighter than the noise. */
static bool is_suspicious(const RfLinkScene *scene, const RfChain *chain)
{
    return chain->hits->len < suspect_hits &&
           (chain->hits->len < least_share * usable_exposures(scene, chain) ||
            median_snr(scene, chain) < faint_snr);
}

/* log odds of a droplet against a chain of chance spots. */
static double weigh(const RfLinkScene *scene, const RfChain *chain, double unclaimed_px2)
{
    unsigned usable = usable_exposures(scene, chain);
    return rf_chain_log_likelihood(scene, chain, chain->spread_px2_s) -
           (chain->hits->len - 1) * log(unclaimed_px2) - (usable - chain->hits->len) * missed_log_odds;
}

static double extent_px(const RfSight *smooth, size_t n)
{
    double low[2] = {HUGE_VAL, HUGE_VAL}, high[2] = {-HUGE_VAL, -HUGE_VAL};
    for (size_t i = 0; i < n; i++)
        for (int k = 0; k < 2; k++) {
            low[k] = fmin(low[k], smooth[i].at_px[k]);
            high[k] = fmax(high[k], smooth[i].at_px[k]);
        }
    return hypot(high[0] - low[0], high[1] - low[1]);
}

static double median_u_px(const RfLinkScene *scene, const RfChain *chain)
{
    unsigned n = chain->hits->len;
    g_autofree float *u = g_new(float, n);
    for (unsigned i = 0; i < n; i++) {
        const RfSpot *spot = rf_link_scene_spot(scene, hit(chain, i)->spot);
        u[i] = fmaxf(spot->u_x_px, spot->u_y_px);
    }
    qsort(u, n, sizeof *u, compare_floats);
    return (double)u[n / 2];
}

static bool is_mostly_frozen(const RfLinkScene *scene, const RfChain *chain)
{
    unsigned frozen = 0;
    for (unsigned i = 1; i < chain->hits->len; i++) {
        const RfHit *a = hit(chain, i - 1), *b = hit(chain, i);
        const double *from_px = scene->sights[a->spot].at_px, *to_px = scene->sights[b->spot].at_px;
        double dt_s = rf_link_scene_exposure(scene, b->exposure)->time_s -
                      rf_link_scene_exposure(scene, a->exposure)->time_s;
        frozen += hypot(to_px[0] - from_px[0], to_px[1] - from_px[1]) <
                  frozen_step * sqrt(scene->model.noise.spread_px2_s * dt_s);
    }
    return 2 * frozen > chain->hits->len - 1;
}

static bool is_still(const RfLinkScene *scene, const RfChain *chain, const RfSight *smooth)
{
    double least_px = fmax(scene->options.least_extent_px, least_extent_u * median_u_px(scene, chain));
    if (is_mostly_frozen(scene, chain)) least_px *= frozen_extent_factor;
    return extent_px(smooth, rf_chain_last(chain) - rf_chain_first(chain) + 1) < least_px;
}

static RfPathPoint make_point(const RfLinkScene *scene, unsigned e, const RfSight *smooth)
{
    const RfSightings *s = scene->sightings;
    const RfPose *pose = &rf_link_scene_exposure(scene, e)->pose;
    RfPathPoint point = {.exposure = e, .spot = -1};
    rf_pose_from_reference(pose, s, smooth->at_px[0] / s->pixel_aspect, smooth->at_px[1], &point.smooth_x_px,
                           &point.smooth_y_px);
    double c = cos(pose->angle_rad), sine = sin(pose->angle_rad);
    double vx = smooth->variance_px2[0], vy = smooth->variance_px2[1];
    point.u_smooth_x_px = sqrt(c * c * vx + sine * sine * vy) / s->pixel_aspect;
    point.u_smooth_y_px = sqrt(sine * sine * vx + c * c * vy);
    point.x_px = point.smooth_x_px;
    point.y_px = point.smooth_y_px;
    point.u_x_px = point.u_smooth_x_px;
    point.u_y_px = point.u_smooth_y_px;
    return point;
}

static void mark_seen(RfPathPoint *point, const RfSpot *spot, int index, const RfPathErrors *noise)
{
    point->is_seen = true;
    point->spot = index;
    point->x_px = (double)spot->x_px;
    point->y_px = (double)spot->y_px;
    point->u_x_px = (double)spot->u_x_px * rf_path_noise_widening(noise, 0);
    point->u_y_px = (double)spot->u_y_px * rf_path_noise_widening(noise, 1);
}

/* Density of spots that may be nobody's: short chains are not beyond suspicion themselves. */
static double chance_px2(const RfLinkScene *scene, const GPtrArray *chains)
{
    double suspects = 0, exposures = fmax(1, scene->sightings->exposures->len);
    for (unsigned i = 0; i < chains->len; i++) {
        unsigned hits = ((const RfChain *)g_ptr_array_index(chains, i))->hits->len;
        suspects += hits < suspect_hits ? hits : 0;
    }
    return rf_fill_unclaimed_px2(scene) + suspects / (exposures * scene->area_px2);
}

/* Whether a droplet at this end of its path, going on for a few exposures, would be at the picture's border. */
static bool is_at_edge(const RfLinkScene *scene, const RfChain *chain, bool is_last)
{
    const RfHit *h = hit(chain, is_last ? chain->hits->len - 1 : 0);
    const RfSpot *spot = rf_link_scene_spot(scene, h->spot);
    RfMotion m = rf_chain_end_state(scene, chain, !is_last, 1);
    double state = rf_field_course_state(scene->field, rf_link_scene_exposure(scene, h->exposure)->time_s);
    double ahead_s = (is_last ? 3 : -3) * scene->exposure_s, margin_px = 2 * scene->merge_px;
    double x = (double)spot->x_px + (m.axis[0].velocity_px_s + state * m.axis[0].response_px_s) * ahead_s;
    double y = (double)spot->y_px + (m.axis[1].velocity_px_s + state * m.axis[1].response_px_s) * ahead_s;
    return x < margin_px || y < margin_px || x > scene->sightings->width - 1 - margin_px ||
           y > scene->sightings->height - 1 - margin_px;
}

static void explain_ends(const RfLinkScene *scene, const RfChain *chain, RfPath *path)
{
    unsigned n = scene->sightings->exposures->len;
    double gap_s = 3 * scene->exposure_s;
    bool is_from_start = rf_chain_start_s(scene, chain) - rf_link_scene_exposure(scene, 0)->time_s < gap_s;
    bool is_to_end = rf_link_scene_exposure(scene, n - 1)->time_s - rf_chain_end_s(scene, chain) < gap_s;
    path->birth = chain->is_cut_before              ? RF_PATH_BIRTH_AMBIGUOUS
                  : is_from_start                   ? RF_PATH_BIRTH_RECORDING
                  : is_at_edge(scene, chain, false) ? RF_PATH_BIRTH_EDGE
                                                    : RF_PATH_BIRTH_FOCUS;
    path->death = chain->is_cut_after              ? RF_PATH_DEATH_AMBIGUOUS
                  : is_to_end                      ? RF_PATH_DEATH_RECORDING
                  : is_at_edge(scene, chain, true) ? RF_PATH_DEATH_EDGE
                                                   : RF_PATH_DEATH_FOCUS;
}

static RfPath *make_path(const RfLinkScene *scene, const RfChain *chain, const RfSight *smooth,
                         const RfPathErrors *noise)
{
    RfPath *path = g_new0(RfPath, 1);
    unsigned first = rf_chain_first(chain), last = rf_chain_last(chain), k = 0;
    path->points = g_array_sized_new(false, false, sizeof(RfPathPoint), last - first + 1);
    for (unsigned e = first; e <= last; e++) {
        RfPathPoint point = make_point(scene, e, &smooth[e - first]);
        if (hit(chain, k)->exposure == e) {
            int spot = hit(chain, k++)->spot;
            mark_seen(&point, rf_link_scene_spot(scene, spot), spot, noise);
        }
        g_array_append_val(path->points, point);
    }
    path->seen = chain->hits->len;
    path->diffusion_px2_s = chain->spread_px2_s / 2;
    path->median_snr = median_snr(scene, chain);
    explain_ends(scene, chain, path);
    return path;
}

static void widen_sights(RfLinkScene *scene, const RfPathErrors *noise)
{
    double x = rf_path_noise_widening(noise, 0);
    double y = rf_path_noise_widening(noise, 1);
    for (unsigned i = 0; i < scene->sightings->spots->len; i++) {
        scene->sights[i].variance_px2[0] *= x * x;
        scene->sights[i].variance_px2[1] *= y * y;
    }
}

static void judge(RfLinkScene *scene, const RfChain *chain, double unclaimed_px2, RfPaths *paths)
{
    /* any spot may begin a chance chain: their number is taken off as so many tries */
    double evidence = weigh(scene, chain, unclaimed_px2) - log(fmax(1, scene->sightings->spots->len));
    if (chain->hits->len < scene->options.least_seen || evidence < scene->options.least_evidence ||
        is_suspicious(scene, chain)) {
        paths->set_aside_short++;
        return;
    }
    g_autofree RfSight *smooth = rf_chain_smooth(scene, chain);
    if (is_still(scene, chain, smooth)) {
        paths->set_aside_still++;
        return;
    }
    RfPath *path = make_path(scene, chain, smooth, &paths->noise);
    path->evidence = evidence;
    path->droplet = paths->paths->len + 1;
    g_ptr_array_add(paths->paths, path);
}

static int compare_chains(const void *a, const void *b)
{
    const RfHit *x = hit(*(RfChain *const *)a, 0), *y = hit(*(RfChain *const *)b, 0);
    return x->exposure != y->exposure ? (x->exposure < y->exposure ? -1 : 1) : x->spot - y->spot;
}

RfPaths *rf_path_build(RfLinkScene *scene, GPtrArray *chains)
{
    RfPaths *paths = g_new0(RfPaths, 1);
    paths->paths = g_ptr_array_new_with_free_func((GDestroyNotify)rf_path_free);
    paths->noise = rf_path_noise_measure(scene, chains);
    widen_sights(scene, &paths->noise);
    g_ptr_array_sort(chains, compare_chains);
    double unclaimed_px2 = chance_px2(scene, chains);
    for (unsigned i = 0; i < chains->len; i++) {
        rf_chain_learn_spread(scene, g_ptr_array_index(chains, i));
        judge(scene, g_ptr_array_index(chains, i), unclaimed_px2, paths);
    }
    return paths;
}
