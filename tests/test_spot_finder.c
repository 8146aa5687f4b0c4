#include "tracker/spot_finder.h"

#include <gsl/gsl_errno.h>
#include <gsl/gsl_randist.h>
#include <math.h>
#include <string.h>

/* A small dark-field recording: reticle, hot pixels, dust, droplets that fall, read noise; 8 bit. */
enum { WIDTH = 320, HEIGHT = 240, FRAMES = 60, DROPLETS = 8 };

typedef struct {
    bool has_droplets, has_dust, is_bright_field;
    double shift_px; /* amplitude of the camera's movement */
} Film;

typedef struct {
    double x_px, y_px, peak, width_px;
} Truth;

static const double NOISE_SD = 2;

static Truth droplet(const Film *film, int i, int frame)
{
    double speed = 0.6 + 0.15 * i, y = fmod(20 + 29 * i + speed * frame, HEIGHT - 24) + 12;
    double x = 25 + 37.3 * i + 3 * sin(0.11 * frame + i);
    double peak = 14 + 8 * i;
    return (Truth){x, y, film->is_bright_field ? -peak : peak, i == 5 ? 3.4 : 1.7};
}

static double line_at(double x, double y)
{
    double away = fmin(fabs(x - 40 * round(x / 40)), fabs(y - 40 * round(y / 40)));
    return 1 - 0.6 * exp(-away * away / (2 * 0.8 * 0.8));
}

static double level_at(const Film *film, double x, double y, double shift_x, double shift_y)
{
    double glow = film->is_bright_field ? 130 : 32;
    double level =
        glow * (1 + 0.15 * (x - WIDTH / 2.0) / WIDTH) * line_at(x - shift_x + 13, y - shift_y + 17);
    if (film->has_dust && hypot(x - shift_x - 200, y - shift_y - 100) < 12)
        level += 30 * exp(-(pow(x - shift_x - 200, 2) + pow(y - shift_y - 100, 2)) / 8);
    return level;
}

static void draw(const Film *film, int index, gsl_rng *random, uint8_t *luma)
{
    double shift_x = film->shift_px * sin(0.7 * index), shift_y = film->shift_px * cos(0.9 * index);
    for (int y = 0; y < HEIGHT; y++)
        for (int x = 0; x < WIDTH; x++) {
            double level = level_at(film, x, y, shift_x, shift_y);
            for (int i = 0; film->has_droplets && i < DROPLETS; i++) {
                Truth d = droplet(film, i, index);
                double r2 = pow(x - shift_x - d.x_px, 2) + pow(y - shift_y - d.y_px, 2);
                if (r2 < 36 * d.width_px * d.width_px)
                    level += d.peak * line_at(x - shift_x + 13, y - shift_y + 17) *
                             exp(-r2 / (2 * d.width_px * d.width_px));
            }
            bool is_hot = (x * 7919 + y * 104729) % 9973 == 5;
            level += is_hot ? 90 : 0;
            luma[y * WIDTH + x] = (uint8_t)CLAMP(lrint(level + gsl_ran_gaussian(random, NOISE_SD)), 0, 255);
        }
}

typedef struct {
    uint8_t *luma; /* of all frames */
    RfSpotFinder *finder;
} Shown;

static RfFrame frame_of(const Shown *shown, int i)
{
    return (RfFrame){.luma = shown->luma + (size_t)i * WIDTH * HEIGHT,
                     .stride_bytes = WIDTH,
                     .width = WIDTH,
                     .height = HEIGHT,
                     .bit_depth = 8,
                     .index = i,
                     .time_s = i / 30.0};
}

static Shown show(const Film *film)
{
    Shown shown = {g_malloc((size_t)FRAMES * WIDTH * HEIGHT), NULL};
    gsl_rng *random = gsl_rng_alloc(gsl_rng_mt19937);
    gsl_rng_set(random, 4711);
    g_autoptr(RfPictureSample) sample = rf_picture_sample_new(1);
    for (int i = 0; i < FRAMES; i++) {
        draw(film, i, random, shown.luma + (size_t)i * WIDTH * HEIGHT);
        RfFrame frame = frame_of(&shown, i);
        g_assert_true(rf_picture_sample_add(sample, &frame, NULL));
    }
    gsl_rng_free(random);
    shown.finder = rf_spot_finder_learn(sample, NULL, NULL);
    g_assert_nonnull(shown.finder);
    return shown;
}

static void leave(Shown *shown)
{
    rf_spot_finder_free(shown->finder);
    g_free(shown->luma);
}

typedef struct {
    int seen, shown, false_spots;
    double pull_square;
} Score;

static void score_frame(const Film *film, const RfLook *look, int frame, Score *score)
{
    bool is_used[256] = {false};
    const RfPose *pose = &look->exposure[0].pose;
    g_assert_cmpuint(look->spots->len, <, 256);
    for (int i = 0; film->has_droplets && i < DROPLETS; i++) {
        Truth d = droplet(film, i, frame);
        /* the pose is against the sample's middle frame */
        double mid = FRAMES / 2, x0 = film->shift_px * sin(0.7 * mid), y0 = film->shift_px * cos(0.9 * mid);
        for (unsigned k = 0; k < look->spots->len; k++) {
            const RfSpot *s = &g_array_index(look->spots, RfSpot, k);
            double dx = (double)s->x_px - pose->shift_x_px - x0 - d.x_px,
                   dy = (double)s->y_px - pose->shift_y_px - y0 - d.y_px;
            if (is_used[k] || hypot(dx, dy) > 2) continue;
            is_used[k] = true;
            score->seen++;
            score->pull_square += 0.5 * (pow(dx / (double)s->u_x_px, 2) + pow(dy / (double)s->u_y_px, 2));
            break;
        }
        score->shown++;
    }
    for (unsigned k = 0; k < look->spots->len; k++) score->false_spots += !is_used[k];
}

static Score look_at_all(const Film *film, const Shown *shown)
{
    Score score = {0};
    RfSpotScratch *scratch = rf_spot_scratch_new(shown->finder);
    RfLook look;
    rf_look_init(&look);
    for (int i = 0; i < FRAMES; i++) {
        RfFrame frame = frame_of(shown, i);
        g_assert_true(rf_spot_finder_look(shown->finder, scratch, &frame, 0, &look, NULL));
        score_frame(film, &look, i, &score);
    }
    rf_look_clear(&look);
    rf_spot_scratch_free(scratch);
    g_test_message("seen %d of %d, false %d in %d frames, pull %.3f", score.seen, score.shown,
                   score.false_spots, FRAMES, score.seen ? sqrt(score.pull_square / score.seen) : 0);
    return score;
}

static void empty_field_gives_nothing(void)
{
    Film film = {0};
    Shown shown = show(&film);
    Score score = look_at_all(&film, &shown);
    /* 0.02 expected per exposure, so 1.2 in all; more than 6 has a chance of 3e-4 */
    g_assert_cmpint(score.false_spots, <=, 6);
    leave(&shown);
}

static void dust_and_hot_pixels_give_nothing(void)
{
    Film film = {.has_dust = true};
    Shown shown = show(&film);
    g_assert_cmpint(look_at_all(&film, &shown).false_spots, <=, 6);
    leave(&shown);
}

static void check_found(const Film *film)
{
    Shown shown = show(film);
    Score score = look_at_all(film, &shown);
    g_assert_cmpint(score.seen, >=, (int)(0.99 * score.shown));
    g_assert_cmpint(score.false_spots, <=, 6);
    g_assert_cmpfloat_with_epsilon(sqrt(score.pull_square / score.seen), 1, 0.1);
    g_assert_cmpint(rf_spot_finder_findings(shown.finder)->is_dark, ==, film->is_bright_field);
    leave(&shown);
}

static void finds_bright_droplets(void)
{
    Film film = {.has_droplets = true, .has_dust = true};
    check_found(&film);
}

static void finds_dark_droplets(void)
{
    Film film = {.has_droplets = true, .is_bright_field = true};
    check_found(&film);
}

static void finds_with_moving_camera(void)
{
    Film film = {.has_droplets = true, .shift_px = 3};
    Shown shown = show(&film);
    g_assert_true(rf_spot_finder_background(shown.finder)->is_moving);
    Score score = look_at_all(&film, &shown);
    g_assert_cmpint(score.seen, >=, (int)(0.98 * score.shown));
    g_assert_cmpint(score.false_spots, <=, 6);
    g_assert_cmpfloat_with_epsilon(sqrt(score.pull_square / score.seen), 1, 0.2);
    leave(&shown);
}

/* Looking again, in any order and with used memory, gives the same bytes. */
static void looks_without_memory(void)
{
    Film film = {.has_droplets = true};
    Shown shown = show(&film);
    RfSpotScratch *scratch = rf_spot_scratch_new(shown.finder), *other = rf_spot_scratch_new(shown.finder);
    RfLook first, again;
    rf_look_init(&first);
    rf_look_init(&again);
    RfFrame frame = frame_of(&shown, 7), another = frame_of(&shown, 40);
    g_assert_true(rf_spot_finder_look(shown.finder, scratch, &frame, 0, &first, NULL));
    g_assert_true(rf_spot_finder_look(shown.finder, other, &another, 0, &again, NULL));
    rf_spot_finder_mark_repeats(shown.finder, &first, &again);
    g_assert_cmpint(again.exposure[0].flags & RF_EXPOSURE_REPEATED, ==, 0);
    g_assert_true(rf_spot_finder_look(shown.finder, other, &frame, 0, &again, NULL));
    g_assert_cmpmem(first.spots->data, first.spots->len * sizeof(RfSpot), again.spots->data,
                    again.spots->len * sizeof(RfSpot));
    rf_spot_finder_mark_repeats(shown.finder, &first, &again);
    g_assert_cmpint(again.exposure[0].flags & RF_EXPOSURE_REPEATED, !=, 0);
    rf_look_clear(&first);
    rf_look_clear(&again);
    rf_spot_scratch_free(scratch);
    rf_spot_scratch_free(other);
    leave(&shown);
}

static void refuses_small_samples_and_other_sizes(void)
{
    g_autoptr(GError) error = NULL;
    g_autoptr(RfPictureSample) sample = rf_picture_sample_new(1);
    g_assert_null(rf_spot_finder_learn(sample, NULL, &error));
    g_assert_nonnull(error);
    Film film = {0};
    Shown shown = show(&film);
    RfFrame frame = frame_of(&shown, 0);
    frame.width = WIDTH / 2;
    RfSpotScratch *scratch = rf_spot_scratch_new(shown.finder);
    RfLook look;
    rf_look_init(&look);
    g_clear_error(&error);
    g_assert_false(rf_spot_finder_look(shown.finder, scratch, &frame, 0, &look, &error));
    g_assert_nonnull(error);
    rf_look_clear(&look);
    rf_spot_scratch_free(scratch);
    leave(&shown);
}

int main(int argc, char **argv)
{
    gsl_set_error_handler_off();
    g_test_init(&argc, &argv, NULL);
    g_test_add_func("/spot-finder/look/empty-field-gives-nothing", empty_field_gives_nothing);
    g_test_add_func("/spot-finder/look/dust-and-hot-pixels-give-nothing", dust_and_hot_pixels_give_nothing);
    g_test_add_func("/spot-finder/look/bright-droplets-with-honest-u", finds_bright_droplets);
    g_test_add_func("/spot-finder/look/dark-droplets-with-honest-u", finds_dark_droplets);
    g_test_add_func("/spot-finder/look/moving-camera", finds_with_moving_camera);
    g_test_add_func("/spot-finder/look/nothing-remembered", looks_without_memory);
    g_test_add_func("/spot-finder/refuses/small-samples-and-other-sizes",
                    refuses_small_samples_and_other_sizes);
    return g_test_run();
}
