#include "calib/gravity_axis.h"

#include <glib.h>
#include <gsl/gsl_errno.h>
#include <gsl/gsl_randist.h>
#include <math.h>

/* Droplets that fall, and rise or fall faster while the field is on, in air that moves; in px/s. */
typedef struct {
    double gravity_rad, tilt_rad;
    unsigned droplets, intervals;
    double noise, air_across, air_along,
        air_sigma; /* air: mean motion, and how it varies between intervals */
    unsigned long seed;
} Bench;

static const Bench usual = {.gravity_rad = 0.05,
                            .droplets = 6,
                            .intervals = 10,
                            .noise = 0.3,
                            .air_across = 2.0,
                            .air_along = 0.0,
                            .air_sigma = 1.0,
                            .seed = 3};

enum { MOST_LEGS = 400 };

static size_t move_droplets(const Bench *b, RfMotionLeg legs[MOST_LEGS])
{
    gsl_rng *random = gsl_rng_alloc(gsl_rng_mt19937);
    double cg = cos(b->gravity_rad), sg = sin(b->gravity_rad);
    double cf = cos(b->gravity_rad + b->tilt_rad), sf = sin(b->gravity_rad + b->tilt_rad);
    size_t n = 0;
    gsl_rng_set(random, b->seed);
    for (unsigned k = 0; k < b->intervals; k++) {
        double across = b->air_across + gsl_ran_gaussian(random, b->air_sigma);
        for (unsigned i = 0; i < b->droplets; i++) {
            double fall = 10.0 + 4.0 * i, field = k % 2 ? (i % 3 - 1.0) * 30.0 - 8.0 : 0.0;
            double x = -sg * (fall + b->air_along) - sf * field + cg * across;
            double y = cg * (fall + b->air_along) + cf * field + sg * across;
            legs[n++] = (RfMotionLeg){.droplet = i + 1,
                                      .interval = k,
                                      .is_off = k % 2 == 0,
                                      .state = (int)(k % 2),
                                      .vx = x + gsl_ran_gaussian(random, b->noise),
                                      .vy = y + gsl_ran_gaussian(random, b->noise),
                                      .var_x = b->noise * b->noise,
                                      .var_y = b->noise * b->noise};
        }
    }
    gsl_rng_free(random);
    return n;
}

static RfGravityAxis refine(const Bench *b, double nominal_rad)
{
    RfMotionLeg legs[MOST_LEGS];
    size_t n = move_droplets(b, legs);
    return rf_gravity_axis_refine(legs, n, nominal_rad);
}

static void nearly_without_noise(void)
{
    Bench b = usual;
    b.noise = 1e-6;
    RfGravityAxis axis = refine(&b, 0.0);
    g_assert_true(axis.is_found);
    g_assert_cmpfloat_with_epsilon(axis.gravity_rad.value, 0.05, 1e-6);
    g_assert_cmpfloat_with_epsilon(axis.air_sigma, 1.0, 0.5);
    g_assert_cmpuint(axis.legs, ==, 60);
}

static void every_direction(void)
{
    for (double nominal = -3.0; nominal < 3.2; nominal += 0.7) {
        Bench b = usual;
        b.gravity_rad = nominal + 0.08;
        RfGravityAxis axis = refine(&b, nominal);
        g_assert_true(axis.is_found);
        g_assert_cmpfloat(fabs(axis.gravity_rad.value - b.gravity_rad), <, 4.0 * axis.gravity_rad.sigma);
        g_assert_cmpfloat(axis.gravity_rad.sigma, <, 0.01);
    }
}

/* Air that drifts steadily, and as fast as droplets fall, doesn't turn the axis. */
static void common_drift_cancels(void)
{
    Bench still = usual, windy = usual;
    still.air_across = 0.0;
    windy.air_across = 12.0;
    RfGravityAxis a = refine(&still, 0.0), b = refine(&windy, 0.0);
    g_assert_cmpfloat_with_epsilon(a.gravity_rad.value, b.gravity_rad.value, 1e-6);
    g_assert_cmpfloat_with_epsilon(a.gravity_rad.sigma, b.gravity_rad.sigma, 1e-3 * a.gravity_rad.sigma);
}

static void units_do_not_matter(void)
{
    RfMotionLeg legs[MOST_LEGS];
    size_t n = move_droplets(&usual, legs);
    RfGravityAxis px = rf_gravity_axis_refine(legs, n, 0.0);
    for (size_t i = 0; i < n; i++) {
        legs[i].vx *= 2e-6, legs[i].vy *= 2e-6;
        legs[i].var_x *= 4e-12, legs[i].var_y *= 4e-12;
    }
    RfGravityAxis m = rf_gravity_axis_refine(legs, n, 0.0);
    g_assert_cmpfloat_with_epsilon(px.gravity_rad.value, m.gravity_rad.value, 1e-6);
    g_assert_cmpfloat_with_epsilon(px.gravity_rad.sigma, m.gravity_rad.sigma, 1e-6);
}

static double pull_rms(Bench b, double *mean)
{
    double squares = 0.0;
    *mean = 0.0;
    for (unsigned i = 0; i < 200; i++) {
        b.seed = 50 + i;
        RfGravityAxis axis = refine(&b, 0.0);
        g_assert_true(axis.is_found);
        double pull = (axis.gravity_rad.value - b.gravity_rad) / axis.gravity_rad.sigma;
        squares += pull * pull;
        *mean += pull / 200;
    }
    return sqrt(squares / 200);
}

static void pulls_have_unit_spread(void)
{
    Bench many = usual, one = usual;
    double mean;
    many.intervals = 6;
    one.droplets = 1;
    one.intervals = 16;
    one.air_sigma = 0.5;
    double rms = pull_rms(many, &mean);
    g_test_message("six droplets: rms %.3f, mean %.3f", rms, mean);
    g_assert_cmpfloat(rms, >, 0.8);
    g_assert_cmpfloat(rms, <, 1.15);
    g_assert_cmpfloat(fabs(mean), <, 0.25);
    rms = pull_rms(one, &mean);
    g_test_message("one droplet: rms %.3f, mean %.3f", rms, mean);
    g_assert_cmpfloat(rms, >, 0.8);
    g_assert_cmpfloat(rms, <, 1.25);
}

static void a_tilted_field_is_seen(void)
{
    Bench b = usual;
    double mean_rad = 0.0, squares = 0.0;
    int seen = 0;
    b.tilt_rad = 0.04;
    for (unsigned i = 0; i < 100; i++) {
        b.seed = 400 + i;
        RfGravityAxis axis = refine(&b, 0.0);
        mean_rad += axis.tilt_rad.value / 100;
        squares += pow((axis.tilt_rad.value - 0.04) / axis.tilt_rad.sigma, 2.0);
        seen += axis.tilt_p < 0.01;
    }
    g_test_message("tilt of 0.04 rad: mean %.4f, pulls %.3f rms, p < 0.01 in %d of 100", mean_rad,
                   sqrt(squares / 100), seen);
    g_assert_cmpfloat_with_epsilon(mean_rad, 0.04, 0.002);
    g_assert_cmpfloat(sqrt(squares / 100), <, 1.2);
    g_assert_cmpint(seen, >, 90);
}

/* The chance that is stated is the chance: p < 0.1 in a tenth of benches without a tilt; 200 of them, so 20 +- 4.2. */
static void parallel_fields_pass(void)
{
    Bench b = usual;
    int low = 0;
    for (unsigned i = 0; i < 200; i++) {
        b.seed = 900 + i;
        low += refine(&b, 0.0).tilt_p < 0.1;
    }
    g_test_message("p < 0.1 in %d of 200", low);
    g_assert_cmpint(low, >, 7);
    g_assert_cmpint(low, <, 36);
}

static void found_without_a_hint(void)
{
    RfMotionLeg legs[MOST_LEGS];
    for (double angle = -3.0; angle < 3.2; angle += 0.6) {
        Bench b = usual;
        b.gravity_rad = angle;
        size_t n = move_droplets(&b, legs);
        RfGravityAxis axis = rf_gravity_axis_find(legs, n);
        g_assert_true(axis.is_found);
        g_assert_cmpfloat(fabs(remainder(axis.gravity_rad.value - angle, 2 * M_PI)), <,
                          4.0 * axis.gravity_rad.sigma);
    }
}

static void too_little_to_tell(void)
{
    RfMotionLeg legs[MOST_LEGS];
    RfGravityAxis none = rf_gravity_axis_refine(NULL, 0, 0.7);
    g_assert_false(none.is_found);
    g_assert_cmpfloat(none.gravity_rad.value, ==, 0.7);
    g_assert_cmpfloat(none.gravity_rad.sigma, ==, 0.0);
    g_assert_cmpfloat(none.tilt_p, ==, 1.0);
    size_t n = move_droplets(&usual, legs);
    g_assert_false(rf_gravity_axis_refine(legs, 2, 0.0).is_found);
    for (size_t i = 0; i < n; i++) legs[i].vx = (double)NAN;
    g_assert_false(rf_gravity_axis_refine(legs, n, 0.0).is_found);
    g_assert_false(rf_gravity_axis_find(legs, n).is_found);
    for (size_t i = 0; i < n; i++) legs[i].vx = legs[i].vy = 0.0;
    g_assert_false(rf_gravity_axis_find(legs, n).is_found);
    /* the sheet says down, everything falls to the left */
    Bench b = usual;
    b.gravity_rad = M_PI_2;
    b.air_sigma = 0.0;
    g_assert_false(refine(&b, 0.0).is_found);
}

int main(int argc, char **argv)
{
    gsl_set_error_handler_off();
    g_test_init(&argc, &argv, NULL);
    g_test_add_func("/gravity_axis/refine/nearly-without-noise", nearly_without_noise);
    g_test_add_func("/gravity_axis/refine/every-direction", every_direction);
    g_test_add_func("/gravity_axis/refine/common-drift-cancels", common_drift_cancels);
    g_test_add_func("/gravity_axis/refine/units-do-not-matter", units_do_not_matter);
    g_test_add_func("/gravity_axis/refine/pulls-have-unit-spread", pulls_have_unit_spread);
    g_test_add_func("/gravity_axis/tilt/a-tilted-field-is-seen", a_tilted_field_is_seen);
    g_test_add_func("/gravity_axis/tilt/parallel-fields-pass", parallel_fields_pass);
    g_test_add_func("/gravity_axis/find/found-without-a-hint", found_without_a_hint);
    g_test_add_func("/gravity_axis/refine/too-little-to-tell", too_little_to_tell);
    return g_test_run();
}
