#include "physics/noise_memory.h"

#include <gsl/gsl_errno.h>
#include <math.h>

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
    rf_noise_memory_estimate(r.trails, r.fits, DROPLETS, &r.model, &fall, &across);
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
    rf_noise_memory_estimate(r.trails, r.fits, DROPLETS, &r.model, &with.fall_memory, &with.across_memory);
    double before = spread_bias(&r, &r.model), after = spread_bias(&r, &with);
    g_test_message("share %.2f, memory %.3f s; bias %.3f before, %.3f after", with.fall_memory.share,
                   with.fall_memory.memory_s, before, after);
    g_assert_cmpfloat(with.fall_memory.share, >, 0);
    g_assert_cmpfloat(with.across_memory.share, >, 0);
    g_assert_cmpfloat(before, <, -0.035);
    g_assert_cmpfloat(fabs(after), <, 0.035);
    record_clear(&r);
}

static void test_no_droplets(void)
{
    RfNoiseMemory fall, across;
    RfDropletModel model = {.medium = &WALK_MEDIUM};
    rf_noise_memory_estimate(NULL, NULL, 0, &model, &fall, &across);
    g_assert_cmpfloat(fall.share, ==, 0);
}

int main(int argc, char **argv)
{
    gsl_set_error_handler_off();
    g_test_init(&argc, &argv, NULL);
    g_test_add_func("/noise-memory/estimate/no-droplets", test_no_droplets);
    g_test_add_func("/noise-memory/estimate/white-stays-white", test_white_stays_white);
    g_test_add_func("/noise-memory/estimate/found-and-bias-gone", test_memory_found_and_bias_gone);
    return g_test_run();
}
