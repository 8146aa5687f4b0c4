#include "physics/noise_memory.h"

#include <gsl/gsl_errno.h>
#include <gsl/gsl_randist.h>
#include <math.h>
#include <stdlib.h>

#include "physics/constants.h"
#include "tests/support/droplet_walk.h"

enum { DROPLETS = 16 };
static const double E = RF_ELEMENTARY_CHARGE_COULOMB;
static const double SWITCHES_S[] = {5, 10, 15, 20, 25};

typedef struct {
    RfFieldTimeline *timeline;
    RfDropletModel model;
    double radius_m[DROPLETS];
    RfTrail trails[DROPLETS];
    RfDropletFit fits[DROPLETS];
} Recording;

static void record(Recording *r, double noise_m, double memory)
{
    gsl_rng *random = gsl_rng_alloc(gsl_rng_mt19937);
    r->timeline = walk_timeline_new(SWITCHES_S, G_N_ELEMENTS(SWITCHES_S), RF_FIELD_TOP_PLUS, 400, 30);
    r->model = (RfDropletModel){.medium = &WALK_MEDIUM, .timeline = r->timeline};
    for (unsigned i = 0; i < DROPLETS; i++) {
        r->radius_m[i] = (0.4 + 0.02 * i) * 1e-6;
        Walk walk = {.medium = &WALK_MEDIUM,
                     .timeline = r->timeline,
                     .radius_m = r->radius_m[i],
                     .charge_coulomb = E * ((int)(i % 7) - 3),
                     .end_s = 30,
                     .frame_s = 1.0 / 30,
                     .exposure = 0.5,
                     .noise_m = noise_m,
                     .noise_memory = memory};
        r->trails[i] = walk_trail_new(&walk, i + 1, random);
        rf_droplet_fit(&r->trails[i], &r->model, &r->fits[i]);
    }
    gsl_rng_free(random);
}

static void record_clear(Recording *r)
{
    for (int i = 0; i < DROPLETS; i++) walk_trail_clear(&r->trails[i]);
    rf_field_timeline_free(r->timeline);
}

/* Mean of ln(radius from the spread/true radius). */
static double spread_bias(const Recording *r, const RfDropletModel *model)
{
    double sum = 0;
    for (int i = 0; i < DROPLETS; i++) {
        RfDropletFit fit;
        rf_droplet_fit(&r->trails[i], model, &fit);
        sum += log(fit.radius_spread_m.value / r->radius_m[i]) / DROPLETS;
    }
    return sum;
}

static void test_white_stays_white(void)
{
    Recording r;
    RfNoiseMemory fall, across;
    record(&r, 0.4e-6, 0);
    rf_noise_memory_estimate(r.trails, r.fits, DROPLETS, &r.model, NULL, &fall, &across);
    g_assert_cmpfloat(fall.share, ==, 0);
    g_assert_cmpfloat(across.share, ==, 0);
    record_clear(&r);
}

/* Half a micrometre of error of which each frame hands half to the next: D reads 12 % high, the radius from the spread
 * 6 % low, until the memory is seen. Sixteen radii of 5 % each leave 1.3 % of chance. */
static void test_memory_found_and_bias_gone(void)
{
    Recording r;
    record(&r, 0.5e-6, 0.5);
    RfDropletModel with = r.model;
    rf_noise_memory_estimate(r.trails, r.fits, DROPLETS, &r.model, NULL, &with.fall_memory, &with.across_memory);
    double before = spread_bias(&r, &r.model), after = spread_bias(&r, &with);
    g_test_message("share %.2f, memory %.3f s; bias %.3f before, %.3f after", with.fall_memory.share,
                   with.fall_memory.memory_s, before, after);
    g_assert_cmpfloat(with.fall_memory.share, >, 0);
    g_assert_cmpfloat(with.across_memory.share, >, 0);
    g_assert_cmpfloat(before, <, -0.035);
    g_assert_cmpfloat(fabs(after), <, 0.035);
    record_clear(&r);
}

/* Every picture keeps a share of the three before and after it; localisation adds white noise of noise_m. The weights sum
 * to 1, so that steady motion is unharmed. */
static void smear(RfTrail *trail, double noise_m, gsl_rng *random)
{
    static const double weights[] = {0.84, 0.045, 0.023, 0.012};
    enum { REACH = G_N_ELEMENTS(weights) - 1 };
    RfSample *samples = g_new(RfSample, trail->n);
    size_t kept = 0;
    for (size_t i = REACH; i + REACH < trail->n; i++) {
        RfSample sample = {.time_s = trail->samples[i].time_s, .u_fall_m = noise_m, .u_drift_m = noise_m};
        for (int k = -REACH; k <= REACH; k++) {
            const RfSample *at = &trail->samples[(ptrdiff_t)i + k];
            sample.fall_m += weights[abs(k)] * at->fall_m;
            sample.drift_m += weights[abs(k)] * at->drift_m;
        }
        sample.fall_m += gsl_ran_gaussian(random, noise_m);
        sample.drift_m += gsl_ran_gaussian(random, noise_m);
        samples[kept++] = sample;
    }
    g_free((void *)trail->samples);
    trail->samples = samples;
    trail->n = kept;
}

static void test_running_mean_found_and_bias_gone(void)
{
    Recording r;
    record(&r, 0, 0);
    gsl_rng *random = gsl_rng_alloc(gsl_rng_mt19937);
    for (int i = 0; i < DROPLETS; i++) {
        smear(&r.trails[i], 0.25e-6, random);
        rf_droplet_fit(&r.trails[i], &r.model, &r.fits[i]);
    }
    gsl_rng_free(random);
    RfDropletModel with = r.model;
    rf_noise_memory_estimate(r.trails, r.fits, DROPLETS, &r.model, NULL, &with.fall_memory, &with.across_memory);
    double before = spread_bias(&r, &r.model), after = spread_bias(&r, &with);
    g_test_message("smear %.4f s, memory %.3f s; bias %.3f before, %.3f after", with.fall_memory.smear_s,
                   with.fall_memory.memory_s, before, after);
    g_assert_cmpfloat(with.fall_memory.smear_s, >, 0);
    g_assert_cmpfloat(with.across_memory.smear_s, >, 0);
    g_assert_cmpfloat(before, >, 0.045);
    g_assert_cmpfloat(fabs(after), <, 0.035);
    record_clear(&r);
}

static void test_no_droplets(void)
{
    RfNoiseMemory fall, across;
    RfDropletModel model = {.medium = &WALK_MEDIUM};
    rf_noise_memory_estimate(NULL, NULL, 0, &model, NULL, &fall, &across);
    g_assert_cmpfloat(fall.share, ==, 0);
}

int main(int argc, char **argv)
{
    gsl_set_error_handler_off();
    g_test_init(&argc, &argv, NULL);
    g_test_add_func("/noise-memory/estimate/no-droplets", test_no_droplets);
    g_test_add_func("/noise-memory/estimate/white-stays-white", test_white_stays_white);
    g_test_add_func("/noise-memory/estimate/found-and-bias-gone", test_memory_found_and_bias_gone);
    g_test_add_func("/noise-memory/estimate/running-mean-found-and-bias-gone", test_running_mean_found_and_bias_gone);
    return g_test_run();
}
