#include "tracker/background.h"

#include <gsl/gsl_errno.h>
#include <gsl/gsl_randist.h>
#include <math.h>
#include <string.h>

/* A dark-field picture with a gradient, a reticle of lines, a sensor's fixed pattern and one hot pixel. All levels are
 * those at 8 bit; deeper films hold 2^(bits - 8) times as much. */
enum { WIDTH = 192, HEIGHT = 144, FRAMES = 48, HOT_X = 101, HOT_Y = 77 };

static const double READ_SD = 1.3, PHOTON_VAR_PER_LEVEL = 0.07;

typedef struct {
    int bit_depth;
    bool has_droplets;
    double drift;    /* of the lamp, over the whole film, relative */
    double shift_px; /* amplitude of the camera's movement */
    int frames;
} Film;

static double pattern(int x, int y)
{
    uint32_t grain = ((uint32_t)x * 2654435761u ^ (uint32_t)y * 40503u) * 2246822519u;
    return 1 + 0.02 * ((double)(grain >> 24) / 255 - 0.5);
}

static double transmission(double x, double y)
{
    double away = fmin(fabs(x - 48 * round(x / 48)), fabs(y - 48 * round(y / 48)));
    return 1 - 0.6 * exp(-away * away / (2 * 1.1 * 1.1));
}

static double lamp(const Film *film, int frame)
{
    return 1 + film->drift * ((double)frame / (FRAMES - 1) - 0.5);
}

/* Under a lamp of 1, without droplets; (x, y) where the camera points. */
static double still_level(double x, double y)
{
    return (30 + 70 * x / WIDTH + 12 * y / HEIGHT) * transmission(x + 20, y + 20);
}

/* Ten that fall 1 to 2.4 px a frame: none hides a pixel half of the time. */
static double droplets_at(int frame, double x, double y)
{
    double sum = 0;
    for (int i = 0; i < 10; i++) {
        double at_x = 12 + 18.5 * i, at_y = fmod(14.0 * i + (1 + 0.15 * i) * frame, HEIGHT);
        sum += 60 * exp(-(pow(x - at_x, 2) + pow(y - at_y, 2)) / (2 * 1.7 * 1.7));
    }
    return sum;
}

static double level_at(const Film *film, int frame, int x, int y)
{
    double seen_x = x - film->shift_px * sin(0.7 * frame), seen_y = y - film->shift_px * cos(0.9 * frame);
    double level = still_level(seen_x, seen_y) * pattern(x, y);
    if (film->has_droplets)
        level += droplets_at(frame, seen_x, seen_y) * transmission(seen_x + 20, seen_y + 20);
    return level * lamp(film, frame) + (x == HOT_X && y == HOT_Y ? 80 : 0);
}

static void draw(const Film *film, int frame, gsl_rng *random, uint16_t *wide, uint8_t *bytes)
{
    double units = ldexp(1, film->bit_depth - 8), most = ldexp(1, film->bit_depth) - 1;
    for (int y = 0; y < HEIGHT; y++)
        for (int x = 0; x < WIDTH; x++) {
            double level = level_at(film, frame, x, y);
            double sd = sqrt(READ_SD * READ_SD + PHOTON_VAR_PER_LEVEL * level);
            long stored = lrint(CLAMP((level + gsl_ran_gaussian(random, sd)) * units, 0, most));
            wide[y * WIDTH + x] = (uint16_t)stored;
            bytes[y * WIDTH + x] = (uint8_t)stored;
        }
}

static RfPictureSample *sample_of(const Film *film)
{
    RfPictureSample *sample = rf_picture_sample_new(1);
    gsl_rng *random = gsl_rng_alloc(gsl_rng_mt19937);
    gsl_rng_set(random, 1905);
    g_autofree uint16_t *wide = g_new(uint16_t, WIDTH * HEIGHT);
    g_autofree uint8_t *bytes = g_new(uint8_t, WIDTH * HEIGHT);
    for (int i = 0; i < film->frames; i++) {
        draw(film, i, random, wide, bytes);
        RfFrame frame = {.luma = film->bit_depth == 8 ? (const void *)bytes : (const void *)wide,
                         .stride_bytes = film->bit_depth == 8 ? WIDTH : 2 * WIDTH,
                         .width = WIDTH,
                         .height = HEIGHT,
                         .bit_depth = film->bit_depth,
                         .index = i,
                         .time_s = i / 30.0};
        g_assert_true(rf_picture_sample_add(sample, &frame, NULL));
    }
    gsl_rng_free(random);
    return sample;
}

static RfBackground *learned(const Film *film, int threads)
{
    g_autoptr(RfPictureSample) sample = sample_of(film);
    GError *error = NULL;
    RfBackground *background = rf_background_learn(sample, threads, &error);
    g_assert_no_error(error);
    return background;
}

static double units_of(const RfBackground *background)
{
    return ldexp(1, background->bit_depth - 8);
}

/* What is learned less what was drawn, in levels at 8 bit: largest and mean, each but for the hot pixel. */
static double worst(const RfBackground *background, double *mean)
{
    double most = 0, sum = 0;
    for (int y = 0; y < HEIGHT; y++)
        for (int x = 0; x < WIDTH; x++) {
            if (x == HOT_X && y == HOT_Y) continue;
            double off = (double)background->level[y * WIDTH + x] / units_of(background) -
                         still_level(x, y) * pattern(x, y);
            most = fmax(most, fabs(off));
            sum += off;
        }
    *mean = sum / (WIDTH * HEIGHT);
    return most;
}

/* Noise where it is dark and where it is bright, against what was drawn and rounded to whole grey levels. */
static void check_noise(const RfBackground *background, double allowed)
{
    double units = units_of(background);
    for (double level = 20; level < 110; level += 20) {
        double drawn = READ_SD * READ_SD + PHOTON_VAR_PER_LEVEL * level + 1 / (12 * units * units);
        double found = rf_pixel_noise_var(&background->noise, level * units) / (units * units);
        g_test_message("%d bit, level %.0f: variance %.3f, drawn %.3f", background->bit_depth, level, found,
                       drawn);
        g_assert_cmpfloat_with_epsilon(found, drawn, allowed * drawn);
    }
    double photon = background->noise.photon_var_per_level / units;
    g_assert_cmpfloat_with_epsilon(photon, PHOTON_VAR_PER_LEVEL, 0.15 * PHOTON_VAR_PER_LEVEL);
}

/* The largest of 27 000 errors of means of 48: sd up to 3.1 / sqrt(48), times 4.5. A grey level is 1 of 256 at any depth. */
static void test_depths(void)
{
    static const int depths[] = {8, 10, 12, 16};
    for (unsigned i = 0; i < G_N_ELEMENTS(depths); i++) {
        Film film = {.bit_depth = depths[i], .frames = FRAMES};
        g_autoptr(RfBackground) background = learned(&film, 1);
        double mean, most = worst(background, &mean);
        g_test_message("%d bit: at most %.3f off, %.4f on average", depths[i], most, mean);
        g_assert_cmpfloat(most, <, 4.5 * 3.1 / sqrt(FRAMES));
        g_assert_cmpfloat(fabs(mean), <, 0.02);
        g_assert_false(background->is_moving);
        check_noise(background, 0.06);
    }
}

/* A droplet's 60 levels pass over many pixels; what stays of them is less than the noise of one frame. */
static void test_droplets(void)
{
    for (int depth = 8; depth <= 16; depth += 8) {
        Film film = {.bit_depth = depth, .has_droplets = true, .frames = FRAMES};
        g_autoptr(RfBackground) background = learned(&film, 1);
        double mean, most = worst(background, &mean);
        g_test_message("%d bit: at most %.3f off, %.4f on average", depth, most, mean);
        g_assert_cmpfloat(most, <, 3.1);
        g_assert_cmpfloat(fabs(mean), <, 0.1);
        check_noise(background, 0.1);
    }
}

/* A lamp that grows by 8 %: up to 8 levels between first and last frame, twice the noise, are neither noise nor shape. */
static void test_lamp_drift(void)
{
    for (int depth = 8; depth <= 16; depth += 8) {
        Film film = {.bit_depth = depth, .drift = 0.08, .frames = FRAMES};
        g_autoptr(RfBackground) background = learned(&film, 1);
        double mean, most = worst(background, &mean);
        g_test_message("%d bit: at most %.3f off, %.4f on average", depth, most, mean);
        g_assert_cmpfloat(most, <, 4.5 * 3.1 / sqrt(FRAMES));
        check_noise(background, 0.06);
    }
}

static void test_lines_and_pixels(void)
{
    for (int depth = 8; depth <= 16; depth += 8) {
        Film film = {.bit_depth = depth, .has_droplets = true, .frames = FRAMES};
        g_autoptr(RfBackground) background = learned(&film, 1);
        g_assert_true(background->flags[HOT_Y * WIDTH + HOT_X] & RF_PIXEL_BAD);
        g_assert_true(background->sensor_flags[HOT_Y * WIDTH + HOT_X] & RF_PIXEL_BAD);
        int bad = 0;
        for (int i = 0; i < WIDTH * HEIGHT; i++) bad += (background->flags[i] & RF_PIXEL_BAD) != 0;
        g_assert_cmpint(bad, <=, 10);
        int on_line = 60 * WIDTH + 76, open = 60 * WIDTH + 52; /* x + 20 = 96; half way between two lines */
        g_assert_true(background->flags[on_line] & RF_PIXEL_LINE);
        g_assert_false(background->flags[open] & RF_PIXEL_LINE);
        g_assert_cmpfloat_with_epsilon((double)background->transmission[on_line], 0.4, 0.06);
        g_assert_cmpfloat((double)background->transmission[open], ==, 1);
    }
}

/* The reference picture is the middle frame's: the lines lie there where they do in that frame. */
static void test_moving_camera(void)
{
    for (int depth = 8; depth <= 16; depth += 8) {
        Film film = {.bit_depth = depth, .has_droplets = true, .shift_px = 2, .frames = FRAMES};
        g_autoptr(RfBackground) background = learned(&film, 1);
        g_test_message("%d bit: movement %.3f px", depth, background->movement_rms_px);
        g_assert_true(background->is_moving);
        g_assert_cmpfloat_with_epsilon(background->movement_rms_px, 2, 0.1);
        double middle_x = 2 * sin(0.7 * (FRAMES / 2)), off = 0, n = 0;
        double middle_y = 2 * cos(0.9 * (FRAMES / 2));
        for (int y = 8; y < HEIGHT - 8; y++)
            for (int x = 8; x < WIDTH - 8; x++, n++)
                off += pow((double)background->level[y * WIDTH + x] / units_of(background) -
                               still_level(x - middle_x, y - middle_y),
                           2);
        g_test_message("%d bit: rms %.3f off", depth, sqrt(off / n));
        g_assert_cmpfloat(sqrt(off / n), <, 1);
        g_assert_true(background->sensor_flags[HOT_Y * WIDTH + HOT_X] & RF_PIXEL_BAD);
    }
}

static void test_threads(void)
{
    Film film = {.bit_depth = 8, .has_droplets = true, .drift = 0.05, .frames = FRAMES};
    g_autoptr(RfBackground) one = learned(&film, 1);
    g_autoptr(RfBackground) four = learned(&film, 4);
    g_assert_cmpmem(one->level, WIDTH * HEIGHT * sizeof(float), four->level, WIDTH * HEIGHT * sizeof(float));
    g_assert_cmpmem(one->flags, WIDTH * HEIGHT, four->flags, WIDTH * HEIGHT);
    g_assert_cmpmem(&one->noise, sizeof one->noise, &four->noise, sizeof four->noise);
}

static void test_too_few(void)
{
    Film film = {.bit_depth = 8, .frames = 7};
    g_autoptr(RfPictureSample) sample = sample_of(&film);
    GError *error = NULL;
    g_assert_null(rf_background_learn(sample, 1, &error));
    g_assert_nonnull(error);
    g_assert_nonnull(strstr(error->message, "7 frames"));
    g_assert_nonnull(strstr(error->message, "need 8"));
    g_error_free(error);
}

int main(int argc, char **argv)
{
    gsl_set_error_handler_off();
    g_test_init(&argc, &argv, NULL);
    g_test_add_func("/background/limits/depths", test_depths);
    g_test_add_func("/background/limits/droplets", test_droplets);
    g_test_add_func("/background/limits/lamp-drift", test_lamp_drift);
    g_test_add_func("/background/limits/lines-and-pixels", test_lines_and_pixels);
    g_test_add_func("/background/limits/moving-camera", test_moving_camera);
    g_test_add_func("/background/limits/threads", test_threads);
    g_test_add_func("/background/limits/too-few", test_too_few);
    return g_test_run();
}
