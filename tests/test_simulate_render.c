#include "cli/simulate_render.h"

#include "support/scene_from_text.h"

#include <gsl/gsl_errno.h>
#include <math.h>
#include <string.h>

typedef struct { /* a small picture and all that it needs */
    RfScene *scene;
    RfWorld *world;
    RfView view;
    RfReticle *reticle;
    RfRenderer *renderer;
    float *levels;
} Easel;

static const RfPose at_rest = {0};

/* Black unless `picture` names a background. */
static Easel easel_new(const char *picture, const char *more)
{
    Easel easel = {0};
    const char *black = strstr(picture, "background") ? "" : "background=0\n";
    g_autofree char *text = g_strconcat("width=96\nheight=64\ngradient=0\n", black, picture, more, NULL);
    easel.scene = scene_from_text(text);
    easel.world = rf_simulate_world_new(easel.scene);
    easel.view = rf_simulate_view_new(easel.scene, easel.world);
    easel.reticle =
        rf_simulate_reticle_new(&easel.view, easel.scene->line_width_m, easel.scene->transmission, false);
    easel.renderer = rf_simulate_render_new(easel.scene, easel.reticle);
    easel.levels = g_new0(float, (size_t)96 * 64);
    rf_simulate_render_begin(easel.renderer, &at_rest, 1);
    return easel;
}

static void easel_clear(Easel *easel)
{
    g_free(easel->levels);
    rf_simulate_render_free(easel->renderer);
    rf_simulate_reticle_free(easel->reticle);
    rf_simulate_world_free(easel->world);
    rf_simulate_scene_free(easel->scene);
}

static double level_at(const Easel *easel, int x, int y)
{
    return (double)easel->levels[y * 96 + x];
}

typedef struct {
    double flux, x, y, var_x, var_y;
} Shape;

static Shape shape_of(const Easel *easel)
{
    Shape s = {0};
    for (int y = 0; y < 64; y++)
        for (int x = 0; x < 96; x++) {
            double level = level_at(easel, x, y);
            s.flux += level;
            s.x += level * x;
            s.y += level * y;
            s.var_x += level * x * x;
            s.var_y += level * y * y;
        }
    s.x /= s.flux;
    s.y /= s.flux;
    s.var_x = s.var_x / s.flux - s.x * s.x;
    s.var_y = s.var_y / s.flux - s.y * s.y;
    return s;
}

/* A pixel-integrated Gaussian has the variance of the Gaussian plus that of the pixel, 1/12. */
static void test_spot_has_its_centre_flux_and_width(void)
{
    Easel easel = easel_new("", "[reticle]\nlines=none\n");
    RfPixel centre = {40.37, 30.81};
    rf_simulate_render_spot(easel.renderer, &centre, 1, 1500, 1.9);
    rf_simulate_render_expected(easel.renderer, easel.levels);
    Shape s = shape_of(&easel);
    g_test_message("centre off by %.2g, %.2g px", s.x - centre.x, s.y - centre.y);
    g_assert_cmpfloat_with_epsilon(s.x, centre.x, 1e-3);
    g_assert_cmpfloat_with_epsilon(s.y, centre.y, 1e-3);
    g_assert_cmpfloat_with_epsilon(s.flux, 1500, 0.1);
    g_assert_cmpfloat_with_epsilon(s.var_x, 1.9 * 1.9 + 1. / 12, 1e-2);
    g_assert_cmpfloat_with_epsilon(s.var_y, 1.9 * 1.9 + 1. / 12, 1e-2);
    easel_clear(&easel);
}

static void test_exposure_smears_along_the_way(void)
{
    Easel easel = easel_new("", "[reticle]\nlines=none\n");
    RfPixel way[] = {{40, 28}, {40, 30}, {40, 32}};
    rf_simulate_render_spot(easel.renderer, way, 3, 1000, 1.5);
    rf_simulate_render_expected(easel.renderer, easel.levels);
    Shape s = shape_of(&easel);
    g_assert_cmpfloat_with_epsilon(s.y, 30, 1e-3);
    g_assert_cmpfloat_with_epsilon(s.var_y - s.var_x, 8. / 3, 1e-2); /* variance of 28, 30, 32 */
    easel_clear(&easel);
}

static void test_wide_pixels_see_narrow_spots(void)
{
    Easel easel = easel_new("pixel_aspect=1.5\n", "[reticle]\nlines=none\n");
    RfPixel centre = {40, 30};
    rf_simulate_render_spot(easel.renderer, &centre, 1, 1000, 3);
    rf_simulate_render_expected(easel.renderer, easel.levels);
    Shape s = shape_of(&easel);
    g_assert_cmpfloat_with_epsilon(s.var_x, 4 + 1. / 12, 1e-2);
    g_assert_cmpfloat_with_epsilon(s.var_y, 9 + 1. / 12, 2e-2);
    easel_clear(&easel);
}

/* A line wide enough lets through what it says; over one spacing it takes its width's share. */
static void test_line_dims_by_its_transmission(void)
{
    Easel easel =
        easel_new("background=100\n",
                  "[reticle]\nlines=horizontal\nspacing=0.05 mm\nline_width=15 um\ntransmission=0.35\n");
    rf_simulate_render_expected(easel.renderer, easel.levels);
    double least = 1e9, most = 0, sum = 0;
    for (int y = 10; y < 50; y++) { /* two spacings of 20 px */
        least = MIN(least, level_at(&easel, 48, y));
        most = MAX(most, level_at(&easel, 48, y));
        sum += level_at(&easel, 48, y);
    }
    g_assert_cmpfloat_with_epsilon(least, 35, 0.01);
    g_assert_cmpfloat_with_epsilon(most, 100, 0.01);
    g_assert_cmpfloat_with_epsilon(sum / 40, 100 * (1 - 0.65 * 6 / 20), 0.05); /* 15 um are 6 px */
    easel_clear(&easel);
}

/* The line dims a droplet behind it as it dims the background. */
static void test_line_dims_droplets_too(void)
{
    Easel bare = easel_new("", "[reticle]\nlines=none\n");
    Easel lined = easel_new("", "[reticle]\nlines=vertical\nspacing=0.05 mm\n");
    RfPixel centre = {41.2, 30};
    rf_simulate_render_spot(bare.renderer, &centre, 1, 1000, 2);
    rf_simulate_render_spot(lined.renderer, &centre, 1, 1000, 2);
    rf_simulate_render_expected(bare.renderer, bare.levels);
    rf_simulate_render_expected(lined.renderer, lined.levels);
    g_autofree float *map = g_new(float, (size_t)96 * 64);
    rf_simulate_reticle_draw(lined.reticle, &at_rest, map);
    for (int x = 30; x < 55; x++)
        g_assert_cmpfloat_with_epsilon(level_at(&lined, x, 30),
                                       level_at(&bare, x, 30) * (double)map[30 * 96 + x], 1e-4);
    easel_clear(&bare);
    easel_clear(&lined);
}

/* Lines stand where simulate_view says, rotated and for a moved camera. */
static void test_lines_stand_where_the_view_says(void)
{
    Easel easel =
        easel_new("background=100\n", "[reticle]\nlines=grid\nspacing=0.05 mm\nrotation=3 degree\n");
    const RfPose pose = {.shift_x_px = 2.4, .shift_y_px = -1.3, .angle_rad = 0.02};
    rf_simulate_render_begin(easel.renderer, &pose, 1);
    rf_simulate_render_expected(easel.renderer, easel.levels);
    for (int y = 5; y < 60; y++)
        for (int x = 5; x < 90; x++) {
            double along, across;
            rf_simulate_view_reticle(&easel.view,
                                     rf_simulate_view_unposed_px(&easel.view, &pose, (RfPixel){x, y}), &along,
                                     &across);
            double away = MIN(fabs(along - rint(along)), fabs(across - rint(across))) * easel.view.pitch_px;
            if (away < 0.3) g_assert_cmpfloat(level_at(&easel, x, y), <, 65);
            if (away > 3.5) g_assert_cmpfloat_with_epsilon(level_at(&easel, x, y), 100, 0.1);
        }
    easel_clear(&easel);
}

/* Photon noise e/g and read noise r: variance 30/20 + 1.2^2, plus 1/12 of rounding. */
static void test_noise_has_its_variance(void)
{
    Easel easel =
        easel_new("background=30\nphotons_per_level=20\nread_noise=1.2\n", "[reticle]\nlines=none\n");
    enum { FRAMES = 40 };
    double sum = 0, square = 0, neighbours = 0, next_frame = 0, n = FRAMES * 96. * 64;
    uint8_t last[96 * 64] = {0};
    for (int f = 0; f < FRAMES; f++) {
        rf_simulate_render_begin(easel.renderer, &at_rest, 1);
        rf_simulate_render_finish(easel.renderer, 0, 1);
        ptrdiff_t stride;
        const uint8_t *pixels = rf_simulate_render_picture(easel.renderer, &stride);
        for (int i = 0; i < 96 * 64; i++) {
            double d = pixels[i] - 30.;
            sum += d;
            square += d * d;
            neighbours += i > 0 ? d * (pixels[i - 1] - 30.) : 0;
            next_frame += f > 0 ? d * (last[i] - 30.) : 0;
            last[i] = pixels[i];
        }
    }
    double variance = 30. / 20 + 1.2 * 1.2 + 1. / 12;
    g_test_message("mean off by %.4f, variance %.4f of %.4f", sum / n, square / n, variance);
    g_assert_cmpfloat_with_epsilon(sum / n, 0, 4 * sqrt(variance / n));
    g_assert_cmpfloat_with_epsilon(square / n, variance, 4 * variance * sqrt(2 / n));
    g_assert_cmpfloat_with_epsilon(neighbours / n, 0, 4 * variance / sqrt(n));
    g_assert_cmpfloat_with_epsilon(next_frame / n, 0, 4 * variance / sqrt(n));
    easel_clear(&easel);
}

/* White noise: sd = (sigma/A) sqrt(2/pi) pixel whatever the width (sum over pixels of (d mu/dx)^2 = A^2 pi/2). */
static void test_bound_is_the_white_noise_limit(void)
{
    Easel easel = easel_new("photons_per_level=1e8\nread_noise=2\n", "[reticle]\nlines=none\n");
    RfPixel centre = {40.3, 30.6};
    double peak = 20, width = 2.5;
    RfSpotBound seen =
        rf_simulate_render_spot(easel.renderer, &centre, 1, peak * 2 * G_PI * width * width, width);
    g_assert_cmpfloat_with_epsilon(seen.bound_px, 2 / peak * sqrt(2 / G_PI), 0.002 * seen.bound_px + 0.0015);
    g_assert_cmpfloat_with_epsilon(seen.snr, 10, 0.4); /* the nearest pixel's centre is off the peak */
    easel_clear(&easel);
}

static void test_spot_outside_is_not_seen(void)
{
    Easel easel = easel_new("", "[reticle]\nlines=none\n");
    RfPixel centre = {-40, 30};
    RfSpotBound seen = rf_simulate_render_spot(easel.renderer, &centre, 1, 1000, 2);
    g_assert_cmpfloat(seen.snr, ==, 0);
    rf_simulate_render_expected(easel.renderer, easel.levels);
    for (int i = 0; i < 96 * 64; i++) g_assert_cmpfloat((double)easel.levels[i], ==, 0);
    easel_clear(&easel);
}

static void test_deep_pictures_use_their_levels(void)
{
    Easel easel = easel_new("background=100\nbit_depth=12\nphotons_per_level=1e8\nread_noise=0\n",
                            "[reticle]\nlines=none\n[video]\ncodec=ffv1\n");
    rf_simulate_render_finish(easel.renderer, 0, 1);
    ptrdiff_t stride;
    const uint16_t *pixels = rf_simulate_render_picture(easel.renderer, &stride);
    g_assert_cmpint((int)stride, ==, 192);
    g_assert_cmpint(pixels[500], ==, 1600);
    easel_clear(&easel);
}

static void test_view_goes_there_and_back(void)
{
    Easel easel = easel_new("pixel_aspect=1.0667\n", "[camera]\ngravity=left\nroll=2 degree\n");
    RfPixel px = {21.5, 47.25};
    RfPlace place = rf_simulate_view_place(&easel.view, px);
    RfPixel back = rf_simulate_view_reference_px(&easel.view, &place);
    g_assert_cmpfloat_with_epsilon(back.x, px.x, 1e-9);
    g_assert_cmpfloat_with_epsilon(back.y, px.y, 1e-9);
    const RfPlace lower = {.fall_m = place.fall_m + 1e-5, .drift_m = place.drift_m};
    g_assert_cmpfloat(rf_simulate_view_reference_px(&easel.view, &lower).x, <,
                      px.x); /* things fall to the left */
    easel_clear(&easel);
}

int main(int argc, char **argv)
{
    gsl_set_error_handler_off();
    g_test_init(&argc, &argv, NULL);
    g_test_add_func("/simulate-render/spot/centre-flux-and-width", test_spot_has_its_centre_flux_and_width);
    g_test_add_func("/simulate-render/spot/exposure-smears-along-the-way",
                    test_exposure_smears_along_the_way);
    g_test_add_func("/simulate-render/spot/wide-pixels-see-narrow-spots", test_wide_pixels_see_narrow_spots);
    g_test_add_func("/simulate-render/spot/bound-is-the-white-noise-limit",
                    test_bound_is_the_white_noise_limit);
    g_test_add_func("/simulate-render/spot/outside-is-not-seen", test_spot_outside_is_not_seen);
    g_test_add_func("/simulate-render/reticle/line-dims-by-its-transmission",
                    test_line_dims_by_its_transmission);
    g_test_add_func("/simulate-render/reticle/line-dims-droplets-too", test_line_dims_droplets_too);
    g_test_add_func("/simulate-render/reticle/lines-stand-where-the-view-says",
                    test_lines_stand_where_the_view_says);
    g_test_add_func("/simulate-render/finish/noise-has-its-variance", test_noise_has_its_variance);
    g_test_add_func("/simulate-render/finish/deep-pictures-use-their-levels",
                    test_deep_pictures_use_their_levels);
    g_test_add_func("/simulate-view/place/there-and-back", test_view_goes_there_and_back);
    return g_test_run();
}
