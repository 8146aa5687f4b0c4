#include "tracker/path_noise.h"

#include <gsl/gsl_errno.h>
#include <math.h>

#include "tests/support/spot_play.h"

enum { droplets = 12 };

/* Droplets that differ in size and brightness enough to tell blur from localisation noise. */
static RfPaths *link_play(double noise_px, double stated_px)
{
    RfActor actors[droplets];
    for (int i = 0; i < droplets; i++)
        actors[i] = (RfActor){
            .x_px = 60 + 48 * i, .y_px = 20, .vy_px_s = 12, .spread_px = 0.12 + 0.02 * i, .until = 900};
    RfPlay play = {.actors = actors,
                   .n_actors = droplets,
                   .frames = 900,
                   .rate_hz = 30,
                   .noise_px = noise_px,
                   .stated_px = stated_px,
                   .miss = 0.01,
                   .seed = 11};
    g_autoptr(GPtrArray) truth = NULL;
    g_autoptr(RfSightings) sightings = rf_spot_play_run(&play, &truth);
    return rf_linker_run(sightings, NULL, NULL, NULL);
}

/* Errors made are what they claim: the scale is 1, no blur, and nothing is widened. */
static void test_honest(void)
{
    g_autoptr(RfPaths) paths = link_play(0.15, 0.15);
    const RfPathErrors *noise = &paths->noise;
    g_test_message("scale %.3f(%.3f) %.3f(%.3f), blur %.3f", noise->scale_x, noise->u_scale_x, noise->scale_y,
                   noise->u_scale_y, noise->blur);
    g_assert_cmpfloat(noise->u_scale_x, >, 0);
    g_assert_cmpfloat(fabs(noise->scale_x - 1), <, 3 * noise->u_scale_x);
    g_assert_cmpfloat(fabs(noise->scale_y - 1), <, 3 * noise->u_scale_y);
    g_assert_cmpfloat(noise->blur, <, 0.1);
    const RfPath *path = g_ptr_array_index(paths->paths, 0);
    g_assert_cmpfloat(fabs(g_array_index(path->points, RfPathPoint, 0).u_x_px - 0.15), <, 1e-6);
}

/* Errors twice as large as claimed, as strong compression makes them: found, and passed on. */
static void test_understated(void)
{
    g_autoptr(RfPaths) paths = link_play(0.3, 0.15);
    const RfPathErrors *noise = &paths->noise;
    g_test_message("scale %.3f(%.3f) %.3f(%.3f)", noise->scale_x, noise->u_scale_x, noise->scale_y,
                   noise->u_scale_y);
    g_assert_cmpfloat(fabs(noise->scale_x - 2), <, 3 * noise->u_scale_x);
    g_assert_cmpfloat(fabs(noise->scale_y - 2), <, 3 * noise->u_scale_y);
    g_assert_cmpfloat(noise->u_scale_x, <, 0.2);
    const RfPath *path = g_ptr_array_index(paths->paths, 0);
    g_assert_cmpfloat(fabs(g_array_index(path->points, RfPathPoint, 0).u_x_px - 0.15 * noise->scale_x), <,
                      1e-6);
}

/* White errors: neighbours are anticorrelated by s^2, further increments not at all. */
static void test_lags(void)
{
    g_autoptr(RfPaths) paths = link_play(0.2, 0.2);
    for (int axis = 0; axis < 2; axis++) {
        const double *lag_px2 = paths->noise.lag_px2[axis];
        double sigma = lag_px2[0] / sqrt(paths->noise.increments);
        g_assert_cmpfloat(fabs(lag_px2[1] + 0.04), <, 4 * sigma);
        g_assert_cmpfloat(fabs(lag_px2[2]), <, 4 * sigma);
        g_assert_cmpfloat(fabs(lag_px2[3]), <, 4 * sigma);
    }
}

static double widening(double scale, double u_scale, double other)
{
    RfPathErrors noise = {.scale_x = scale, .u_scale_x = u_scale, .scale_y = other, .u_scale_y = 0.05};
    return rf_path_noise_widening(&noise, 0);
}

static void test_widening(void)
{
    g_assert_cmpfloat(widening(1, 0, 1.5), ==, 1);
    g_assert_cmpfloat(widening(1.5, 0.3, 1.5), ==, 1); /* 2.25 - 3 * 0.9 */
    g_assert_cmpfloat(widening(1.5, 0.1, 1.5), ==, 1.5);
    g_assert_cmpfloat(widening(0.7, 0.01, 1.5), ==, 1);
    g_assert_cmpfloat(widening(1.5, 0.1, 1), ==, 1); /* one axis alone is motion */
}

int main(int argc, char **argv)
{
    g_test_init(&argc, &argv, NULL);
    gsl_set_error_handler_off();
    g_test_add_func("/path_noise/measure/honest", test_honest);
    g_test_add_func("/path_noise/measure/understated", test_understated);
    g_test_add_func("/path_noise/measure/lags", test_lags);
    g_test_add_func("/path_noise/widening", test_widening);
    return g_test_run();
}
