#include "calib/length_scale.h"

#include <gsl/gsl_errno.h>
#include <gsl/gsl_randist.h>
#include <math.h>
#include <string.h>

/* A reticle drawn by the formula: soft-edged lines of a given width, seen through noise. Shares nothing with what measures it. */
typedef struct {
    int width, height;
    double period_x_px, period_y_px; /* square pixels; 0: no such family */
    double phase_x_px, phase_y_px;   /* of a line, from the picture's centre */
    double angle_rad, k1, pixel_aspect;
    double line_px, blur_px;
    double level, contrast, noise; /* contrast < 0: dark lines */
    unsigned long seed;
    unsigned missing; /* bit i: the line of index i - 16 is left out */
    double visible;   /* part of each line's length that shows, 0..1 */
} Drawing;

static const Drawing usual = {.width = 640,
                              .height = 480,
                              .period_x_px = 48.37,
                              .period_y_px = 48.37,
                              .phase_x_px = 7.21,
                              .phase_y_px = -3.77,
                              .pixel_aspect = 1.0,
                              .line_px = 2.0,
                              .blur_px = 1.0,
                              .level = 120.0,
                              .contrast = -40.0,
                              .noise = 3.0,
                              .seed = 1,
                              .visible = 1.0};

/* Place in the ideal plane: the model's own direction, from seen to undistorted. */
static void ideal_place(const Drawing *d, double x, double y, double *across_x, double *across_y)
{
    double p = (x - 0.5 * (d->width - 1)) * d->pixel_aspect, q = y - 0.5 * (d->height - 1);
    double h2 = 0.25 * (pow(d->width * d->pixel_aspect, 2) + pow(d->height, 2));
    double stretch = 1.0 + d->k1 * (p * p + q * q) / h2, c = cos(d->angle_rad), s = sin(d->angle_rad);
    *across_x = (c * p + s * q) * stretch;
    *across_y = (-s * p + c * q) * stretch;
}

/* A box of the line's width, blurred; 1 in the middle of a wide line. */
static double cover(const Drawing *d, double at_px, double phase_px, double period_px, double along_px)
{
    if (!(period_px > 0.0)) return 0.0;
    double k = round((at_px - phase_px) / period_px), off_px = at_px - phase_px - k * period_px;
    bool is_missing = k >= -16 && k < 16 && (d->missing >> (unsigned)(k + 16) & 1u);
    if (is_missing || along_px > d->visible * d->width - 0.5 * d->width) return 0.0;
    double soft = sqrt(2.0) * d->blur_px;
    return 0.5 * (erf((off_px + 0.5 * d->line_px) / soft) - erf((off_px - 0.5 * d->line_px) / soft));
}

static float *draw(const Drawing *d)
{
    gsl_rng *random = gsl_rng_alloc(gsl_rng_mt19937);
    gsl_rng_set(random, d->seed);
    float *pixels = g_new(float, (size_t)d->width *(size_t)d->height);
    for (int y = 0; y < d->height; y++)
        for (int x = 0; x < d->width; x++) {
            double across_x, across_y;
            ideal_place(d, x, y, &across_x, &across_y);
            double a = cover(d, across_x, d->phase_x_px, d->period_x_px, across_y);
            double b = cover(d, across_y, d->phase_y_px, d->period_y_px, across_x);
            double light =
                d->level + 15.0 * sin(x / 170.0) - 20.0 * pow(hypot(x - 300.0, y - 200.0) / 400.0, 2);
            pixels[(size_t)y * (size_t)d->width + (size_t)x] =
                (float)(light + d->contrast * (a + b - a * b) + gsl_ran_gaussian(random, d->noise));
        }
    gsl_rng_free(random);
    return pixels;
}

static RfLengthScale *measure_pixels(const float *pixels, const Drawing *d, RfReticleLines lines,
                                     GError **error)
{
    RfPicture picture = {pixels, (ptrdiff_t)(sizeof(float) * (size_t)d->width), d->width, d->height,
                         RF_PIXEL_FLOAT};
    RfLengthScaleOptions options = {lines, {1e-4, 0.0}, d->pixel_aspect, {1.0, 0.0}};
    return rf_length_scale_measure(&picture, &options, error);
}

static RfLengthScale *measure(const Drawing *d, RfReticleLines lines)
{
    g_autoptr(GError) error = NULL;
    g_autofree float *pixels = draw(d);
    RfLengthScale *scale = measure_pixels(pixels, d, lines, &error);
    g_assert_no_error(error);
    return scale;
}

static void assert_within(RfValue got, double truth, double sigmas, const char *what)
{
    g_test_message("%s %.6g(%.2g), truth %.6g", what, got.value, got.sigma, truth);
    g_assert_cmpfloat(got.sigma, >, 0.0);
    g_assert_cmpfloat(fabs(got.value - truth), <, sigmas * got.sigma);
}

static void assert_true_scale(const Drawing *d, const RfLengthScale *scale)
{
    double period_x_px = d->period_x_px > 0.0 ? d->period_x_px : d->period_y_px;
    double period_y_px = d->period_y_px > 0.0 ? d->period_y_px : d->period_x_px;
    assert_within(scale->px_per_spacing_x, period_x_px / d->pixel_aspect, 4.0, "x");
    assert_within(scale->px_per_spacing_y, period_y_px, 4.0, "y");
    assert_within(scale->rotation_rad, d->angle_rad, 4.0, "rotation");
}

static void without_noise(void)
{
    Drawing d = usual;
    d.noise = 0.0;
    g_autoptr(RfLengthScale) scale = measure(&d, RF_RETICLE_GRID);
    g_assert_cmpfloat_with_epsilon(scale->px_per_spacing_x.value, d.period_x_px, 2e-4);
    g_assert_cmpfloat_with_epsilon(scale->px_per_spacing_y.value, d.period_y_px, 2e-4);
    g_assert_cmpfloat_with_epsilon(scale->rotation_rad.value, 0.0, 1e-5);
    g_assert_cmpuint(scale->lines_found, ==, 13 + 9); /* a tenth lies 1.4 px from the edge */
    g_assert_true(scale->is_dark);
}

static void grids_of_every_kind(void)
{
    static const double angles_deg[] = {-10.0, -3.3, -0.2, 0.7, 5.0, 10.0},
                        widths_px[] = {1.0, 2.0, 3.5, 5.0};
    for (size_t i = 0; i < G_N_ELEMENTS(angles_deg); i++)
        for (size_t k = 0; k < G_N_ELEMENTS(widths_px); k++) {
            Drawing d = usual;
            d.angle_rad = angles_deg[i] * M_PI / 180.0;
            d.line_px = widths_px[k];
            d.contrast = (i + k) % 2 ? 25.0 : -25.0;
            d.seed = 100 + 10 * i + k;
            g_test_message("angle %g deg, width %g px", angles_deg[i], widths_px[k]);
            g_autoptr(RfLengthScale) scale = measure(&d, RF_RETICLE_GRID);
            assert_true_scale(&d, scale);
            g_assert_true(scale->is_dark == (d.contrast < 0.0));
            g_assert_cmpuint(scale->lines_found, >=, 20);
        }
}

static void from_close_lines_to_wide_ones(void)
{
    static const double periods_px[] = {9.3, 17.0, 80.2, 151.0};
    for (size_t i = 0; i < G_N_ELEMENTS(periods_px); i++) {
        Drawing d = usual;
        d.period_x_px = d.period_y_px = periods_px[i];
        d.angle_rad = 0.02;
        g_autoptr(RfLengthScale) scale = measure(&d, RF_RETICLE_GRID);
        assert_true_scale(&d, scale);
    }
}

static void one_family_gives_both_scales(void)
{
    Drawing horizontal = usual, vertical = usual;
    horizontal.period_x_px = vertical.period_y_px = 0.0;
    horizontal.pixel_aspect = vertical.pixel_aspect = 16.0 / 15.0;
    horizontal.angle_rad = vertical.angle_rad = -0.05;
    g_autoptr(RfLengthScale) across = measure(&horizontal, RF_RETICLE_HORIZONTAL);
    assert_true_scale(&horizontal, across);
    g_autoptr(RfLengthScale) upright = measure(&vertical, RF_RETICLE_VERTICAL);
    assert_true_scale(&vertical, upright);
    g_assert_cmpfloat(across->squareness.sigma, ==, 0.0);
}

static void pixels_that_are_not_square(void)
{
    Drawing d = usual;
    d.pixel_aspect = 16.0 / 15.0;
    d.angle_rad = 0.06;
    g_autoptr(RfLengthScale) scale = measure(&d, RF_RETICLE_GRID);
    assert_true_scale(&d, scale);
    assert_within(scale->squareness, 1.0, 4.0, "squareness");
}

static void a_wrong_aspect_shows_as_squareness(void)
{
    Drawing d = usual;
    g_autofree float *pixels = draw(&d);
    d.pixel_aspect = 1.01;
    g_autoptr(RfLengthScale) scale = measure_pixels(pixels, &d, RF_RETICLE_GRID, NULL);
    assert_within(scale->squareness, 1.0 / 1.01, 4.0, "squareness");
    assert_within(scale->px_per_spacing_x, usual.period_x_px, 4.0, "x");
}

static void low_contrast(void)
{
    Drawing d = usual;
    d.contrast = -3.0;
    d.noise = 3.0;
    d.angle_rad = 0.03;
    g_autoptr(RfLengthScale) scale = measure(&d, RF_RETICLE_GRID);
    assert_true_scale(&d, scale);
}

static void missing_lines_keep_their_number(void)
{
    Drawing d = usual;
    d.missing = 1u << 14 | 1u << 17 | 1u << 18;
    g_autoptr(RfLengthScale) scale = measure(&d, RF_RETICLE_GRID);
    assert_true_scale(&d, scale);
    g_assert_cmpuint(scale->lines_found, ==, 22 - 6);
    const RfReticleLine *last = &g_array_index(scale->lines, RfReticleLine, scale->lines->len - 1);
    g_assert_false(last->is_horizontal);
    g_assert_cmpint(last->index, ==, 12);
}

static void lines_that_show_in_part(void)
{
    Drawing d = usual;
    d.visible = 0.6;
    g_autoptr(RfLengthScale) scale = measure(&d, RF_RETICLE_GRID);
    assert_true_scale(&d, scale);
}

/* Bright spots, dust that hides lines, and a block of strokes like numerals. */
static void spoil(float *pixels, const Drawing *d)
{
    gsl_rng *random = gsl_rng_alloc(gsl_rng_mt19937);
    gsl_rng_set(random, 7);
    for (int i = 0; i < 60; i++) {
        double x = d->width * gsl_rng_uniform(random), y = d->height * gsl_rng_uniform(random);
        double size_px = 1.0 + 5.0 * gsl_rng_uniform(random), height = gsl_ran_gaussian(random, 120.0);
        for (int v = MAX(0, (int)y - 20); v < MIN(d->height, (int)y + 20); v++)
            for (int u = MAX(0, (int)x - 20); u < MIN(d->width, (int)x + 20); u++)
                pixels[v * d->width + u] +=
                    (float)(height * exp(-0.5 * pow(hypot(u - x, v - y) / size_px, 2)));
    }
    for (int i = 0; i < 40; i++) {
        int x = 20 + 14 * i, y = 100 + 3 * (i % 2), is_upright = i % 3;
        for (int k = 0; k < 9; k++)
            pixels[(y + (is_upright ? k : 0)) * d->width + x + (is_upright ? 0 : k)] -= 60.0F;
    }
    gsl_rng_free(random);
}

static void droplets_dust_and_numerals(void)
{
    Drawing d = usual;
    d.angle_rad = -0.04;
    g_autofree float *pixels = draw(&d);
    spoil(pixels, &d);
    g_autoptr(RfLengthScale) scale = measure_pixels(pixels, &d, RF_RETICLE_GRID, NULL);
    assert_true_scale(&d, scale);
}

static void distortion_is_seen_and_taken_out(void)
{
    static const double bends[] = {-0.02, 0.01};
    for (size_t i = 0; i < G_N_ELEMENTS(bends); i++) {
        Drawing d = usual;
        d.k1 = bends[i];
        d.angle_rad = 0.02;
        g_autoptr(RfLengthScale) scale = measure(&d, RF_RETICLE_GRID);
        g_assert_true(scale->uses_k1);
        assert_within(scale->k1, d.k1, 4.0, "k1");
        assert_true_scale(&d, scale);
    }
    g_autoptr(RfLengthScale) straight = measure(&usual, RF_RETICLE_GRID);
    assert_within(straight->k1, 0.0, 4.0, "k1");
}

/* Honest sigmas: (found - true)/sigma over many pictures has a spread of 1. With 2 x 60 pulls a spread outside 0.8..1.25 is
 * beyond 3 sigma. */
static void pulls_have_unit_spread(void)
{
    double squares_period = 0.0, squares_angle = 0.0, sum = 0.0;
    int n = 0, n_angle = 0;
    for (unsigned i = 0; i < 60; i++) {
        Drawing d = usual;
        d.width = 320;
        d.height = 240;
        d.noise = 6.0;
        d.seed = 1000 + i;
        d.angle_rad = 0.005 * (i % 13) - 0.03;
        d.period_x_px = d.period_y_px = 24.0 + 0.37 * i;
        d.phase_x_px = 0.31 * i;
        g_autoptr(RfLengthScale) scale = measure(&d, RF_RETICLE_GRID);
        double x = (scale->px_per_spacing_x.value - d.period_x_px) / scale->px_per_spacing_x.sigma;
        double y = (scale->px_per_spacing_y.value - d.period_y_px) / scale->px_per_spacing_y.sigma;
        double angle = (scale->rotation_rad.value - d.angle_rad) / scale->rotation_rad.sigma;
        squares_period += x * x + y * y;
        sum += x + y;
        squares_angle += angle * angle;
        n += 2;
        n_angle++;
    }
    g_test_message("pulls: period %.3f rms, %.3f mean; angle %.3f rms", sqrt(squares_period / n), sum / n,
                   sqrt(squares_angle / n_angle));
    g_assert_cmpfloat(sqrt(squares_period / n), >, 0.8);
    g_assert_cmpfloat(sqrt(squares_period / n), <, 1.25);
    g_assert_cmpfloat(fabs(sum / n), <, 3.0 / sqrt(n));
    g_assert_cmpfloat(sqrt(squares_angle / n_angle), >, 0.7);
    g_assert_cmpfloat(sqrt(squares_angle / n_angle), <, 1.35);
}

static void spacing_and_plane_enter_the_sigma(void)
{
    g_autofree float *pixels = draw(&usual);
    RfPicture picture = {pixels, (ptrdiff_t)(sizeof(float) * 640), 640, 480, RF_PIXEL_FLOAT};
    RfLengthScaleOptions options = {RF_RETICLE_GRID, {1e-4, 2e-7}, 1.0, {1.01, 0.003}};
    g_autoptr(RfLengthScale) scale = rf_length_scale_measure(&picture, &options, NULL);
    double relative = scale->px_per_m_x.sigma / scale->px_per_m_x.value;
    g_assert_cmpfloat_with_epsilon(scale->px_per_m_x.value, scale->px_per_spacing_x.value / 1e-4 * 1.01,
                                   1e-6);
    g_assert_cmpfloat_with_epsilon(relative, hypot(0.002, 0.003 / 1.01), 1e-6);
}

static void every_kind_of_pixel_gives_the_same(void)
{
    Drawing d = usual;
    g_autofree float *pixels = draw(&d);
    size_t n = (size_t)d.width * (size_t)d.height;
    g_autofree guint8 *bytes = g_new(guint8, n);
    g_autofree guint16 *words = g_new(guint16, n);
    for (size_t i = 0; i < n; i++) {
        pixels[i] = roundf(CLAMP(pixels[i], 0.0F, 255.0F));
        bytes[i] = (guint8)pixels[i];
        words[(n / (size_t)d.width - 1 - i / (size_t)d.width) * (size_t)d.width + i % (size_t)d.width] =
            bytes[i];
    }
    RfLengthScaleOptions options = {RF_RETICLE_GRID, {1e-4, 0.0}, 1.0, {1.0, 0.0}};
    RfPicture byte_picture = {bytes, d.width, d.width, d.height, RF_PIXEL_U8};
    RfPicture upside_down = {words + (size_t)(d.height - 1) * (size_t)d.width, -2 * (ptrdiff_t)d.width,
                             d.width, d.height, RF_PIXEL_U16};
    g_autoptr(RfLengthScale) a = measure_pixels(pixels, &d, RF_RETICLE_GRID, NULL);
    g_autoptr(RfLengthScale) b = rf_length_scale_measure(&byte_picture, &options, NULL);
    g_autoptr(RfLengthScale) c = rf_length_scale_measure(&upside_down, &options, NULL);
    g_assert_cmpfloat(a->px_per_m_x.value, ==, b->px_per_m_x.value);
    g_assert_cmpfloat(a->px_per_m_x.value, ==, c->px_per_m_x.value);
    g_assert_cmpfloat(a->rotation_rad.value, ==, c->rotation_rad.value);
}

static void refuse(const Drawing *d, const float *pixels, int code, const char *needle)
{
    g_autoptr(GError) error = NULL;
    g_autoptr(RfLengthScale) scale = measure_pixels(pixels, d, RF_RETICLE_GRID, &error);
    g_assert_null(scale);
    g_assert_error(error, RF_LENGTH_SCALE_ERROR, code);
    g_test_message("-> %s", error->message);
    g_assert_nonnull(strstr(error->message, needle));
}

static void empty_reticles(void)
{
    Drawing d = usual;
    d.contrast = 0.0;
    for (d.seed = 0; d.seed < 8; d.seed++) {
        g_autofree float *noise = draw(&d);
        refuse(&d, noise, RF_LENGTH_SCALE_ERROR_NO_LINES, "empty");
        spoil(noise, &d);
        refuse(&d, noise, RF_LENGTH_SCALE_ERROR_NO_LINES, "empty");
    }
    d.noise = 0.0;
    g_autofree float *smooth = draw(&d);
    refuse(&d, smooth, RF_LENGTH_SCALE_ERROR_NO_LINES, "empty");
    memset(smooth, 0, sizeof(float) * 640 * 480);
    refuse(&d, smooth, RF_LENGTH_SCALE_ERROR_NO_LINES, "empty");
}

static void too_few_lines(void)
{
    Drawing d = usual;
    d.period_x_px = d.period_y_px = 2000.0;
    g_autofree float *one = draw(&d);
    refuse(&d, one, RF_LENGTH_SCALE_ERROR_FEW_LINES, "only one");
    d = usual;
    d.missing = ~(1u << 14 | 1u << 17);
    g_autofree float *two = draw(&d);
    refuse(&d, two, RF_LENGTH_SCALE_ERROR_FEW_LINES, "needn't be neighbours");
    d = usual;
    d.period_x_px = 0.0;
    g_autofree float *half = draw(&d);
    refuse(&d, half, RF_LENGTH_SCALE_ERROR_NO_LINES, "vertical");
}

static void two_lines_that_fill_the_picture(void)
{
    Drawing d = usual;
    d.width = d.height = 320;
    d.period_x_px = d.period_y_px = 170.0;
    d.phase_x_px = d.phase_y_px = 85.0;
    g_autoptr(RfLengthScale) scale = measure(&d, RF_RETICLE_GRID);
    assert_true_scale(&d, scale);
    g_assert_cmpuint(scale->lines_found, ==, 4);
}

static void pictures_that_are_none(void)
{
    Drawing d = usual;
    g_autofree float *pixels = draw(&d);
    d.width = 20;
    refuse(&d, pixels, RF_LENGTH_SCALE_ERROR_PICTURE, "20 x 480");
    d.width = 640;
    pixels[640 * 3 + 5] = (float)HUGE_VAL;
    refuse(&d, pixels, RF_LENGTH_SCALE_ERROR_PICTURE, "pixel (5, 3)");
}

int main(int argc, char **argv)
{
    gsl_set_error_handler_off();
    g_test_init(&argc, &argv, NULL);
    g_test_add_func("/length_scale/measure/without-noise", without_noise);
    g_test_add_func("/length_scale/measure/grids-of-every-kind", grids_of_every_kind);
    g_test_add_func("/length_scale/measure/from-close-lines-to-wide-ones", from_close_lines_to_wide_ones);
    g_test_add_func("/length_scale/measure/one-family-gives-both-scales", one_family_gives_both_scales);
    g_test_add_func("/length_scale/measure/pixels-that-are-not-square", pixels_that_are_not_square);
    g_test_add_func("/length_scale/measure/a-wrong-aspect-shows-as-squareness",
                    a_wrong_aspect_shows_as_squareness);
    g_test_add_func("/length_scale/measure/low-contrast", low_contrast);
    g_test_add_func("/length_scale/measure/missing-lines-keep-their-number", missing_lines_keep_their_number);
    g_test_add_func("/length_scale/measure/lines-that-show-in-part", lines_that_show_in_part);
    g_test_add_func("/length_scale/measure/droplets-dust-and-numerals", droplets_dust_and_numerals);
    g_test_add_func("/length_scale/measure/distortion-is-seen-and-taken-out",
                    distortion_is_seen_and_taken_out);
    g_test_add_func("/length_scale/measure/pulls-have-unit-spread", pulls_have_unit_spread);
    g_test_add_func("/length_scale/measure/spacing-and-plane-enter-the-sigma",
                    spacing_and_plane_enter_the_sigma);
    g_test_add_func("/length_scale/measure/every-kind-of-pixel-gives-the-same",
                    every_kind_of_pixel_gives_the_same);
    g_test_add_func("/length_scale/measure/two-lines-that-fill-the-picture", two_lines_that_fill_the_picture);
    g_test_add_func("/length_scale/refuse/empty-reticles", empty_reticles);
    g_test_add_func("/length_scale/refuse/too-few-lines", too_few_lines);
    g_test_add_func("/length_scale/refuse/pictures-that-are-none", pictures_that_are_none);
    return g_test_run();
}
