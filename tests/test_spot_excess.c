#include "tracker/spot_excess.h"

#include <gsl/gsl_errno.h>
#include <gsl/gsl_randist.h>
#include <math.h>

enum { SIDE = 25, TRIALS = 600 };

typedef struct {
    double smooth_px; /* noise averaged over so many pixels each way, its variance kept */
    double stretch;   /* width along x over that along y */
} Scene;

static void draw_noise(gsl_rng *random, int smooth, double noise[SIDE][SIDE])
{
    double raw[SIDE + 8][SIDE + 8];
    for (int y = 0; y < SIDE + 8; y++)
        for (int x = 0; x < SIDE + 8; x++) raw[y][x] = gsl_ran_gaussian(random, 1);
    for (int y = 0; y < SIDE; y++)
        for (int x = 0; x < SIDE; x++) {
            double sum = 0;
            for (int j = 0; j < smooth; j++)
                for (int i = 0; i < smooth; i++) sum += raw[y + j][x + i];
            noise[y][x] = sum / smooth;
        }
}

static void draw(const Scene *scene, gsl_rng *random, const RfSpotFit *spot, RfPatchPixel *pixels)
{
    double noise[SIDE][SIDE];
    draw_noise(random, (int)scene->smooth_px, noise);
    for (int y = 0; y < SIDE; y++)
        for (int x = 0; x < SIDE; x++) {
            double dx = (x - spot->x_px) / scene->stretch, dy = (y - spot->y_px) * scene->stretch;
            double light = spot->peak * exp(-(dx * dx + dy * dy) / (2 * spot->width_px * spot->width_px));
            pixels[y * SIDE + x] = (RfPatchPixel){(float)x, (float)y, (float)(light + 2 * noise[y][x]), 4, 1};
        }
}

static double mean_excess(const Scene *scene)
{
    g_autoptr(RfSpotShape) shape = rf_spot_shape_new(2.0);
    RfLocaliser localiser = {shape, 1, 1, 0, 2.0};
    gsl_rng *random = gsl_rng_alloc(gsl_rng_mt19937);
    gsl_rng_set(random, 20260000);
    double mean = 0;
    for (int t = 0; t < TRIALS; t++) {
        RfPatchPixel pixels[SIDE * SIDE];
        float models[SIDE * SIDE];
        RfSpotFit fit = {.x_px = 11.5 + gsl_rng_uniform(random),
                         .y_px = 11.5 + gsl_rng_uniform(random),
                         .peak = 60,
                         .width_px = 2};
        draw(scene, random, &fit, pixels);
        RfLocaliseOutcome outcome = rf_localise(&localiser, pixels, SIDE * SIDE, &fit, 1);
        g_assert_true(outcome.is_converged);
        rf_localise_models(&localiser, &fit, 1, pixels, SIDE * SIDE, models);
        mean += rf_spot_excess(&localiser, pixels, models, SIDE * SIDE, &fit, outcome.offset) / TRIALS;
    }
    gsl_rng_free(random);
    g_test_message("smooth %.0f stretch %.2f: %.3f", scene->smooth_px, scene->stretch, mean);
    return mean;
}

/* Mean of a chi-square of one: 1 with sd sqrt(2 / TRIALS) = 0.058. */
static void test_white(void)
{
    g_assert_cmpfloat_with_epsilon(mean_excess(&(Scene){1, 1}), 1, 4 * 0.058);
}

/* Noise with the same scatter of pixels, but coarse: nine times the power at the largest scale, less at the spot's. */
static void test_coarse(void)
{
    double mean = mean_excess(&(Scene){3, 1});
    g_assert_cmpfloat(mean, >, 3);
    g_assert_cmpfloat(mean, <, 9);
}

/* Blur along a side of the picture, as of a droplet that moves, is not noise. */
static void test_stretched(void)
{
    g_assert_cmpfloat_with_epsilon(mean_excess(&(Scene){1, 1.08}), 1, 4 * 0.058);
}

static void test_nothing_to_see(void)
{
    g_autoptr(RfSpotShape) shape = rf_spot_shape_new(2.0);
    RfLocaliser localiser = {shape, 1, 1, 0, 2.0};
    RfSpotFit fit = {.width_px = 2};
    g_assert_cmpfloat(rf_spot_excess(&localiser, NULL, NULL, 0, &fit, 0), ==, 0);
}

int main(int argc, char **argv)
{
    gsl_set_error_handler_off();
    g_test_init(&argc, &argv, NULL);
    g_test_add_func("/spot-excess/limits/nothing-to-see", test_nothing_to_see);
    g_test_add_func("/spot-excess/noise/white", test_white);
    g_test_add_func("/spot-excess/noise/coarse", test_coarse);
    g_test_add_func("/spot-excess/shape/stretched", test_stretched);
    return g_test_run();
}
