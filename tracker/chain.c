#include "tracker/chain.h"

#include <limits.h>
#include <math.h>

/* The wandering of velocity and response makes an end forget what lies further back. */
enum { remembered_hits = 400 };

RfChain *rf_chain_new(const RfLinkScene *scene)
{
    RfChain *chain = g_new0(RfChain, 1);
    chain->hits = g_array_new(false, false, sizeof(RfHit));
    chain->spread_px2_s = scene->model.noise.spread_px2_s;
    return chain;
}

void rf_chain_free(RfChain *chain)
{
    if (!chain) return;
    g_array_unref(chain->hits);
    g_free(chain);
}

static const RfHit *hit(const RfChain *chain, unsigned i)
{
    return &g_array_index(chain->hits, RfHit, i);
}

static double hit_time_s(const RfLinkScene *scene, const RfHit *h)
{
    return rf_link_scene_exposure(scene, h->exposure)->time_s;
}

unsigned rf_chain_first(const RfChain *chain)
{
    return hit(chain, 0)->exposure;
}

unsigned rf_chain_last(const RfChain *chain)
{
    return hit(chain, chain->hits->len - 1)->exposure;
}

double rf_chain_start_s(const RfLinkScene *scene, const RfChain *chain)
{
    return hit_time_s(scene, hit(chain, 0));
}

double rf_chain_end_s(const RfLinkScene *scene, const RfChain *chain)
{
    return hit_time_s(scene, hit(chain, chain->hits->len - 1));
}

void rf_chain_carry(const RfLinkScene *scene, const RfMotionModel *model, RfMotion *motion, double from_s,
                    double to_s)
{
    rf_motion_predict(motion, model, to_s - from_s, rf_field_course_integral_s(scene->field, from_s, to_s));
}

static RfMotionModel own_model(const RfLinkScene *scene, double spread_px2_s)
{
    RfMotionModel model = scene->model;
    double ratio = spread_px2_s / model.noise.spread_px2_s;
    model.noise.spread_px2_s = spread_px2_s;
    model.noise.wander_px2_s3 *=
        fmin(1, ratio); /* the air's drift is everybody's: a heavy droplet doesn't wander more */
    return model;
}

/* Takes one hit in; returns its surprise. */
static double meet(RfMotion *motion, const RfMotionModel *model, const RfSight *sight)
{
    bool is_changed;
    double surprise = rf_motion_surprise(motion, model, sight, &is_changed);
    if (is_changed) rf_motion_loosen(motion, model);
    rf_motion_update(motion, sight);
    return surprise;
}

/* The last hits_most hits in one direction; returns the sum of the surprises after the first of them. */
static double run_filter(const RfLinkScene *scene, const RfChain *chain, const RfMotionModel *model,
                         bool is_backward, double prior_factor, unsigned hits_most, RfMotion *motion)
{
    unsigned n = chain->hits->len, skipped = n > hits_most ? n - hits_most : 0;
    double sum = 0;
    const RfHit *last = hit(chain, is_backward ? n - 1 - skipped : skipped);
    rf_motion_start(motion, model, &scene->sights[last->spot], prior_factor);
    for (unsigned i = skipped + 1; i < n; i++) {
        const RfHit *h = hit(chain, is_backward ? n - 1 - i : i);
        rf_chain_carry(scene, model, motion, hit_time_s(scene, last), hit_time_s(scene, h));
        sum += meet(motion, model, &scene->sights[h->spot]);
        last = h;
    }
    return sum;
}

RfMotion rf_chain_end_state(const RfLinkScene *scene, const RfChain *chain, bool is_backward,
                            double prior_factor)
{
    RfMotionModel model = own_model(scene, chain->spread_px2_s);
    RfMotion motion;
    run_filter(scene, chain, &model, is_backward, prior_factor, remembered_hits, &motion);
    return motion;
}

double rf_chain_log_likelihood(const RfLinkScene *scene, const RfChain *chain, double spread_px2_s)
{
    RfMotionModel model = own_model(scene, spread_px2_s);
    RfMotion motion;
    return -run_filter(scene, chain, &model, false, 1, UINT_MAX, &motion);
}

void rf_chain_learn_spread(const RfLinkScene *scene, RfChain *chain)
{
    if (chain->hits->len < 20) return;
    /* golden section in the logarithm of the spread: the likelihood has one peak there */
    const double golden = 0.6180339887498949;
    double low = log(scene->model.noise.spread_px2_s / 8), high = log(scene->model.noise.spread_px2_s * 4);
    double a = high - golden * (high - low), b = low + golden * (high - low);
    double at_a = rf_chain_log_likelihood(scene, chain, exp(a)),
           at_b = rf_chain_log_likelihood(scene, chain, exp(b));
    while (high - low > 0.15) {
        if (at_a > at_b) {
            high = b;
            b = a;
            at_b = at_a;
            a = high - golden * (high - low);
            at_a = rf_chain_log_likelihood(scene, chain, exp(a));
        } else {
            low = a;
            a = b;
            at_a = at_b;
            b = low + golden * (high - low);
            at_b = rf_chain_log_likelihood(scene, chain, exp(b));
        }
    }
    chain->spread_px2_s = exp((low + high) / 2);
}

/* One filter step an exposure, hit or not, for both axes. */
static void record_steps(const RfLinkScene *scene, const RfChain *chain, RfKalmanStep *steps[2])
{
    RfMotionModel model = own_model(scene, chain->spread_px2_s);
    RfMotion motion;
    rf_motion_start(&motion, &model, &scene->sights[hit(chain, 0)->spot], 1);
    unsigned first = rf_chain_first(chain), last = rf_chain_last(chain), next = 1;
    for (int k = 0; k < 2; k++) steps[k][0] = (RfKalmanStep){.predicted = motion.axis[k], .variance_px2 = -1};
    for (unsigned e = first + 1; e <= last; e++) {
        double from_s = rf_link_scene_exposure(scene, e - 1)->time_s,
               to_s = rf_link_scene_exposure(scene, e)->time_s;
        double field_s = rf_field_course_integral_s(scene->field, from_s, to_s);
        rf_motion_predict(&motion, &model, to_s - from_s, field_s);
        const RfSight *sight = NULL;
        if (hit(chain, next)->exposure == e) sight = &scene->sights[hit(chain, next++)->spot];
        bool is_changed = false;
        if (sight) rf_motion_surprise(&motion, &model, sight, &is_changed);
        if (is_changed) rf_motion_loosen(&motion, &model);
        for (int k = 0; k < 2; k++)
            steps[k][e - first] =
                (RfKalmanStep){motion.axis[k], field_s, to_s - from_s, sight ? sight->at_px[k] : 0,
                               sight ? sight->variance_px2[k] : -1};
        if (sight) rf_motion_update(&motion, sight);
    }
}

RfSight *rf_chain_smooth(const RfLinkScene *scene, const RfChain *chain)
{
    size_t n = rf_chain_last(chain) - rf_chain_first(chain) + 1;
    RfSight *smooth = g_new0(RfSight, n);
    g_autofree RfKalmanStep *x = g_new0(RfKalmanStep, n), *y = g_new0(RfKalmanStep, n);
    g_autofree double *position_px = g_new(double, n), *variance_px2 = g_new(double, n);
    RfKalmanStep *steps[2] = {x, y};
    record_steps(scene, chain, steps);
    for (int k = 0; k < 2; k++) {
        rf_kalman_smooth(steps[k], n, position_px, variance_px2);
        for (size_t i = 0; i < n; i++) {
            smooth[i].at_px[k] = position_px[i];
            smooth[i].variance_px2[k] = variance_px2[i];
        }
    }
    return smooth;
}

double rf_chain_log_peak(const RfLinkScene *scene, const RfChain *chain, bool is_at_end, unsigned n)
{
    n = MIN(n, chain->hits->len);
    double sum = 0;
    for (unsigned i = 0; i < n; i++)
        sum += scene->sights[hit(chain, is_at_end ? chain->hits->len - 1 - i : i)->spot].log_peak;
    return sum / n;
}
