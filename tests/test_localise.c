#include "tracker/localise.h"

#include <gsl/gsl_errno.h>
#include <gsl/gsl_randist.h>
#include <math.h>

enum { SIDE = 31, TRIALS = 1500 };

/* A noisy picture of spots behind a reticle line, and what of it the fit gets. */
typedef struct {
    double noise_sd, photon_var_per_level;
    double line_x_px, line_transmission; /* a line 2 px wide along y; transmission 1: none */
    bool is_line_known;
} Scene;

static double shade_at(const Scene *scene, double x)
{
    /* share of the pixel that the line covers */
    double left = fmax(x - 0.5, scene->line_x_px - 1), right = fmin(x + 0.5, scene->line_x_px + 1);
    double covered = fmax(0, right - left);
    return 1 - covered * (1 - scene->line_transmission);
}

static unsigned draw(const Scene *scene, const RfSpotFit *spots, unsigned n, gsl_rng *random,
                     RfPatchPixel *pixels)
{
    unsigned k = 0;
    for (int y = 0; y < SIDE; y++)
        for (int x = 0; x < SIDE; x++) {
            double light = 0, shade = shade_at(scene, x);
            for (unsigned i = 0; i < n; i++) {
                double r2 = pow(x - spots[i].x_px, 2) + pow(y - spots[i].y_px, 2);
                light += spots[i].peak * exp(-r2 / (2 * spots[i].width_px * spots[i].width_px));
            }
            double var = scene->noise_sd * scene->noise_sd;
            double sd = sqrt(var + scene->photon_var_per_level * shade * light);
            pixels[k++] =
                (RfPatchPixel){(float)x, (float)y, (float)(shade * light + gsl_ran_gaussian(random, sd)),
                               (float)var, (float)(scene->is_line_known ? shade : 1)};
        }
    return k;
}

typedef struct {
    double rms_x, rms_y, bias_x, pull_x, pull_y;
} Errors;

static Errors measure(const Scene *scene, double peak, double width, double x0, unsigned trials)
{
    g_autoptr(RfSpotShape) shape = rf_spot_shape_new(2.0);
    RfLocaliser localiser = {shape, 1, 1, scene->photon_var_per_level, 2.0};
    gsl_rng *random = gsl_rng_alloc(gsl_rng_mt19937);
    gsl_rng_set(random, 20260000);
    Errors e = {0};
    for (unsigned t = 0; t < trials; t++) {
        RfPatchPixel pixels[SIDE * SIDE];
        double within = x0 >= 0 ? 0 : gsl_rng_uniform(random) - 0.5;
        RfSpotFit truth = {.x_px = (x0 >= 0 ? x0 : 15) + within,
                           .y_px = 15 + gsl_rng_uniform(random) - 0.5,
                           .peak = peak,
                           .width_px = width};
        unsigned n = draw(scene, &truth, 1, random, pixels);
        RfSpotFit fit = {
            .x_px = truth.x_px + 0.7, .y_px = truth.y_px - 0.6, .peak = 0.7 * peak, .width_px = 2.2};
        RfLocaliseOutcome outcome = rf_localise(&localiser, pixels, n, &fit, 1);
        g_assert_true(outcome.is_converged);
        double dx = fit.x_px - truth.x_px, dy = fit.y_px - truth.y_px;
        e.rms_x += dx * dx / trials, e.rms_y += dy * dy / trials, e.bias_x += dx / trials;
        e.pull_x += dx * dx / fit.var_x_px2 / trials, e.pull_y += dy * dy / fit.var_y_px2 / trials;
    }
    gsl_rng_free(random);
    return (Errors){sqrt(e.rms_x), sqrt(e.rms_y), e.bias_x, sqrt(e.pull_x), sqrt(e.pull_y)};
}

/* White noise: no estimator without bias does better than sd / peak * sqrt(2 / pi) px, whatever the width. Derived from
 * sum (d mu / d x)^2 = peak^2 pi / 2; equal to the sum over pixels to 1e-11 at a width of 1.7 px. */
static void check_bound(double snr, double most)
{
    Scene scene = {.noise_sd = 2, .line_transmission = 1};
    Errors e = measure(&scene, 2 * snr, 2.0, -1, TRIALS);
    double bound = sqrt(2 / G_PI) / snr, ratio = sqrt((e.rms_x * e.rms_x + e.rms_y * e.rms_y) / 2) / bound;
    g_test_message("snr %g: rms over bound %.3f, pulls %.3f %.3f", snr, ratio, e.pull_x, e.pull_y);
    double chance = 3 / sqrt(4.0 * TRIALS); /* three sd of an rms from 2 * TRIALS numbers */
    g_assert_cmpfloat(ratio, <, most + chance);
    g_assert_cmpfloat(ratio, >, 1 - chance);
    g_assert_cmpfloat_with_epsilon(e.pull_x, 1, 0.05 + chance);
    g_assert_cmpfloat_with_epsilon(e.pull_y, 1, 0.05 + chance);
}

static void at_cramer_rao_bound(void)
{
    check_bound(30, 1.02);
    check_bound(10, 1.02);
    check_bound(5, 1.02);
}

static void near_cramer_rao_bound_when_faint(void)
{
    check_bound(3, 1.05);
}

/* Photon noise: 1000 photons in a spot of sd 1.3 px on 4 background photons per pixel can be placed to 0.049877 px
 * (Cramer-Rao bound of the pixelised Poisson problem, 31 x 31 pixels, derived numerically; 5000 photons on 25: 0.022855; 500 on 9 in one of sd 2 px: 0.166337;
 * K. I. Mortensen et al., Nat. Methods 7 (2010) 377, eq. 5, from memory, agrees to 2e-4). A pixel integrates, which widens
 * the spot by 1/12 px^2. */
static void check_poisson_bound(double sd_px, double photons, double background, double bound_px)
{
    double width = sqrt(sd_px * sd_px + 1.0 / 12);
    g_autoptr(RfSpotShape) shape = rf_spot_shape_new(width);
    RfLocaliser localiser = {shape, 1, 1, 1, width};
    RfSpotFit fit = {.x_px = 15, .y_px = 15, .peak = photons / (2 * G_PI * width * width), .width_px = width};
    RfPatchPixel pixels[SIDE * SIDE];
    for (int i = 0; i < SIDE * SIDE; i++) {
        double r2 = pow(i % SIDE - 15, 2) + pow(i / SIDE - 15, 2);
        pixels[i] = (RfPatchPixel){(float)(i % SIDE), (float)(i / SIDE),
                                   (float)(fit.peak * exp(-r2 / (2 * width * width))), (float)background, 1};
    }
    RfLocaliseOutcome outcome = rf_localise(&localiser, pixels, SIDE * SIDE, &fit, 1);
    g_assert_true(outcome.is_converged);
    g_test_message("%g photons: u %.6f px, bound %.6f px", photons, sqrt(fit.var_x_px2), bound_px);
    g_assert_cmpfloat_with_epsilon(sqrt(fit.var_x_px2) / bound_px, 1, 0.005);
    g_assert_cmpfloat_with_epsilon(sqrt(fit.var_y_px2) / bound_px, 1, 0.005);
}

static void states_photon_bound(void)
{
    check_poisson_bound(1.3, 1000, 4, 0.049877);
    check_poisson_bound(1.3, 5000, 25, 0.022855);
    check_poisson_bound(2, 500, 9, 0.166337);
}

/* White noise of sd 1 under a peak of 100: u is sqrt(2 / pi) / 100 = 0.00797885 px whatever the width, from the sum over
 * pixels of the squared slope, pi A^2 / 2 (derived; where a spot isn't narrower than a pixel). 0.3 %: what fitting the
 * background too costs in a finite patch. */
static void states_white_noise_bound(void)
{
    for (double width = 1.3; width < 3; width += 0.4) {
        g_autoptr(RfSpotShape) shape = rf_spot_shape_new(width);
        RfLocaliser localiser = {shape, 1, 1, 0, width};
        RfSpotFit fit = {.x_px = 15, .y_px = 15, .peak = 100, .width_px = width};
        RfPatchPixel pixels[SIDE * SIDE];
        for (int i = 0; i < SIDE * SIDE; i++) {
            double r2 = pow(i % SIDE - 15, 2) + pow(i / SIDE - 15, 2);
            pixels[i] = (RfPatchPixel){(float)(i % SIDE), (float)(i / SIDE),
                                       (float)(100 * exp(-r2 / (2 * width * width))), 1, 1};
        }
        g_assert_true(rf_localise(&localiser, pixels, SIDE * SIDE, &fit, 1).is_converged);
        g_test_message("width %.1f px: u %.8f px", width, sqrt(fit.var_x_px2));
        g_assert_cmpfloat_with_epsilon(sqrt(fit.var_x_px2) / 0.00797885, 1, 0.003);
    }
}

/* A line 2 px wide that lets 35 % through, at 0 to 4 px from the droplet. */
static void crosses_line_without_pull(void)
{
    for (double line = 15; line <= 19; line += 0.5) {
        Scene scene = {.noise_sd = 2, .line_transmission = 0.35, .line_x_px = line, .is_line_known = true};
        Errors e = measure(&scene, 60, 2.0, 15, 600);
        double chance = 3.5 * e.rms_x / sqrt(600);
        g_test_message("line at %+.1f px: bias %.4f px, pull %.3f", line - 15, e.bias_x, e.pull_x);
        g_assert_cmpfloat(fabs(e.bias_x), <, 0.005 + chance);
        g_assert_cmpfloat_with_epsilon(e.pull_x, 1, 0.05 + 3 / sqrt(2.0 * 600));
    }
}

/* Without noise what is left is bias alone. */
static void line_bias_vanishes_without_noise(void)
{
    for (double line = 15; line <= 19; line += 0.25) {
        Scene scene = {.noise_sd = 0.01, .line_transmission = 0.35, .line_x_px = line, .is_line_known = true};
        Errors e = measure(&scene, 60, 2.0, 15, 5);
        g_assert_cmpfloat(fabs(e.bias_x), <, 0.002);
    }
}

static void unknown_line_pulls(void)
{
    Scene scene = {.noise_sd = 2, .line_transmission = 0.35, .line_x_px = 16.5, .is_line_known = false};
    Errors e = measure(&scene, 60, 2.0, 15, 200);
    g_assert_cmpfloat(e.bias_x, <, -0.2);
}

static void splits_neighbours(void)
{
    g_autoptr(RfSpotShape) shape = rf_spot_shape_new(1.7);
    RfLocaliser localiser = {shape, 1, 1, 0, 1.7};
    Scene scene = {.noise_sd = 2, .line_transmission = 1};
    gsl_rng *random = gsl_rng_alloc(gsl_rng_mt19937);
    gsl_rng_set(random, 7);
    double pull = 0;
    for (int t = 0; t < 300; t++) {
        RfPatchPixel pixels[SIDE * SIDE];
        RfSpotFit truth[2] = {{.x_px = 13, .y_px = 15, .peak = 60, .width_px = 1.7},
                              {.x_px = 17, .y_px = 15.5, .peak = 40, .width_px = 1.7}};
        unsigned n = draw(&scene, truth, 2, random, pixels);
        RfSpotFit fits[2] = {{.x_px = 12.5, .y_px = 15, .peak = 50, .width_px = 2},
                             {.x_px = 17.5, .y_px = 15, .peak = 50, .width_px = 2}};
        g_assert_true(rf_localise(&localiser, pixels, n, fits, 2).is_converged);
        for (int i = 0; i < 2; i++) {
            g_assert_cmpfloat_with_epsilon(fits[i].x_px, truth[i].x_px, 0.8);
            pull += pow(fits[i].x_px - truth[i].x_px, 2) / fits[i].var_x_px2 / 600;
        }
    }
    gsl_rng_free(random);
    g_assert_cmpfloat_with_epsilon(sqrt(pull), 1, 0.12);
}

static void refuses_too_few_pixels(void)
{
    g_autoptr(RfSpotShape) shape = rf_spot_shape_new(1.7);
    RfLocaliser localiser = {shape, 1, 1, 0, 1.7};
    RfPatchPixel pixels[6] = {{0, 0, 1, 1, 1}, {1, 0, 1, 1, 1}, {2, 0, 1, 1, 1},
                              {0, 1, 1, 1, 1}, {1, 1, 1, 1, 1}, {2, 1, 1, 1, 1}};
    RfSpotFit fit = {.x_px = 1, .y_px = 0.5, .peak = 1, .width_px = 1.7};
    g_assert_false(rf_localise(&localiser, pixels, 6, &fit, 1).is_converged);
}

int main(int argc, char **argv)
{
    gsl_set_error_handler_off();
    g_test_init(&argc, &argv, NULL);
    g_test_add_func("/localise/white-noise/reaches-cramer-rao-bound", at_cramer_rao_bound);
    g_test_add_func("/localise/white-noise/near-bound-when-faint", near_cramer_rao_bound_when_faint);
    g_test_add_func("/localise/white-noise/states-cramer-rao-bound", states_white_noise_bound);
    g_test_add_func("/localise/photon-noise/states-cramer-rao-bound", states_photon_bound);
    g_test_add_func("/localise/line/known-line-does-not-pull", crosses_line_without_pull);
    g_test_add_func("/localise/line/no-bias-without-noise", line_bias_vanishes_without_noise);
    g_test_add_func("/localise/line/unknown-line-pulls", unknown_line_pulls);
    g_test_add_func("/localise/neighbours/two-spots-are-split", splits_neighbours);
    g_test_add_func("/localise/refuses/too-few-pixels", refuses_too_few_pixels);
    return g_test_run();
}
