#include "tracker/spot_fitter.h"

#include <gsl/gsl_errno.h>
#include <gsl/gsl_randist.h>
#include <math.h>

enum { SIDE = 64, TRIALS = 200, LEVEL = 60 };

static const double FOCUS_PX = 1.8;

/* Brightest at rim_px from its middle, falling off with width_px to both sides; rim_px 0: a Gaussian spot. */
typedef struct {
    double x_px, y_px, peak, rim_px, width_px;
} Light;

typedef struct {
    Light lights[2];
    int n_lights;
    double noise_sd; /* where the background's noise has 1 */
    RfCandidate candidates[3];
    int n_candidates;
} Scene;

static void draw(const Scene *scene, gsl_rng *random, uint8_t *luma)
{
    for (int y = 0; y < SIDE; y++)
        for (int x = 0; x < SIDE; x++) {
            double level = LEVEL + gsl_ran_gaussian(random, scene->noise_sd);
            for (int i = 0; i < scene->n_lights; i++) {
                const Light *light = &scene->lights[i];
                double off = (hypot(x - light->x_px, y - light->y_px) - light->rim_px) / light->width_px;
                level += light->peak * exp(-off * off / 2);
            }
            luma[y * SIDE + x] = (uint8_t)lrint(level);
        }
}

static GArray *fit(const Scene *scene, const RfSpotShape *shape, gsl_rng *random)
{
    static uint8_t luma[SIDE * SIDE], flags[SIDE * SIDE];
    static float level[SIDE * SIDE], transmission[SIDE * SIDE];
    draw(scene, random, luma);
    for (int i = 0; i < SIDE * SIDE; i++) level[i] = LEVEL, transmission[i] = 1;
    RfBackground background = {.width = SIDE,
                               .height = SIDE,
                               .bit_depth = 8,
                               .pixel_aspect = 1,
                               .saturation_level = 255,
                               .noise = {.read_var = 1},
                               .level = level,
                               .transmission = transmission,
                               .flags = flags,
                               .sensor_flags = flags};
    RfFrame frame = {.luma = luma, .stride_bytes = SIDE, .width = SIDE, .height = SIDE, .bit_depth = 8};
    RfExposureView view = {.frame = &frame, .background = &background, .line_step = 1, .cos_angle = 1};
    view.lamp.gain = 1;
    for (int i = 0; i < RF_LAMP_BANDS; i++) view.lamp.band_gain[i] = 1;
    RfFitterSettings settings = {.localiser = {shape, 1, 1, 0, FOCUS_PX},
                                 .sign = 1,
                                 .least_significance = 5,
                                 .narrowest_px = 0.6,
                                 .u_factor = 1,
                                 .shape_error = 0.05};
    GArray *spots = g_array_new(false, false, sizeof(RfSpot));
    g_autoptr(RfSpotFitter) fitter = rf_spot_fitter_new();
    rf_spot_fitter_run(fitter, &settings, &view, scene->candidates, scene->n_candidates, spots);
    return spots;
}

/* Share of trials with that many spots. */
static double share_with(const Scene *scene, unsigned wanted)
{
    g_autoptr(RfSpotShape) shape = rf_spot_shape_new(FOCUS_PX);
    gsl_rng *random = gsl_rng_alloc(gsl_rng_mt19937);
    gsl_rng_set(random, 20260000);
    int right = 0;
    for (int t = 0; t < TRIALS; t++) {
        g_autoptr(GArray) spots = fit(scene, shape, random);
        right += spots->len == wanted;
    }
    gsl_rng_free(random);
    g_test_message("%u spots in %d of %d", wanted, right, TRIALS);
    return (double)right / TRIALS;
}

/* Far out of focus a droplet is brighter at its rim than in its middle: the detector sees peaks there, and spots at them
 * do explain it, though worse than a single wide one. */
static void test_peaks_on_a_rim_are_one(void)
{
    Scene scene = {.lights = {{32, 32, 12, 5, 2.3}},
                   .n_lights = 1,
                   .noise_sd = 1,
                   .candidates = {{17.25f, 17.25f, 7, 0}, {14.5f, 17, 7, 0}, {16, 14, 6, 0}},
                   .n_candidates = 3};
    g_assert_cmpfloat(share_with(&scene, 1), >=, 0.98);
}

/* Two droplets side by side stay two, though the noise makes the fit poor. */
static void test_neighbours_are_two(void)
{
    Scene scene = {.lights = {{28, 32, 20, 0, 2}, {35, 32, 20, 0, 2}},
                   .n_lights = 2,
                   .noise_sd = 1.3,
                   .candidates = {{13.75f, 15.75f, 12, 0}, {17.25f, 15.75f, 12, 0}},
                   .n_candidates = 2};
    g_assert_cmpfloat(share_with(&scene, 2), >=, 0.98);
}

int main(int argc, char **argv)
{
    g_test_init(&argc, &argv, NULL);
    gsl_set_error_handler_off();
    g_test_add_func("/spot-fitter/run/peaks-on-a-rim-are-one", test_peaks_on_a_rim_are_one);
    g_test_add_func("/spot-fitter/run/neighbours-are-two", test_neighbours_are_two);
    return g_test_run();
}
