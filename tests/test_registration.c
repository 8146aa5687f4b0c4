#include "tracker/registration.h"

#include <gsl/gsl_errno.h>
#include <gsl/gsl_randist.h>
#include <math.h>

enum { WIDTH = 320, HEIGHT = 240, PERIOD_PX = 40 };

/* A reticle under even light: one spacing on it looks the same but for the picture's borders. */
typedef struct {
    double transmission; /* of a line's middle */
    double noise_sd;     /* grey levels, of one pixel */
    bool is_horizontal_only;
    double droplets_y_px; /* height of three bright droplets; 0: none */
} Scene;

static const Scene GRID = {.transmission = 0.4, .noise_sd = 1.6};

static double level_at(const Scene *scene, const RfPose *pose, double x, double y)
{
    double right = x - pose->shift_x_px - 0.5 * (WIDTH - 1), down = y - pose->shift_y_px - 0.5 * (HEIGHT - 1);
    double c = cos(pose->angle_rad), s = sin(pose->angle_rad);
    double across = c * right + s * down + 13, along = c * down - s * right + 17;
    double away_x = across - PERIOD_PX * round(across / PERIOD_PX),
           away_y = along - PERIOD_PX * round(along / PERIOD_PX);
    double away = scene->is_horizontal_only ? fabs(away_y) : fmin(fabs(away_x), fabs(away_y));
    return 34 * (1 - (1 - scene->transmission) * exp(-away * away / 2));
}

static RfRegistration *learn(const Scene *scene)
{
    g_autofree float *level = g_new(float, WIDTH *HEIGHT);
    const RfPose home = {0};
    for (int i = 0; i < WIDTH * HEIGHT; i++) level[i] = (float)level_at(scene, &home, i % WIDTH, i / WIDTH);
    return rf_registration_new(level, WIDTH, HEIGHT, 1, scene->noise_sd);
}

static double droplet_at(const Scene *scene, double x, double y)
{
    double level = 0;
    for (int i = 0; scene->droplets_y_px > 0 && i < 3; i++) {
        double dx = x - 69 - 30 * i, dy = y - fmod(scene->droplets_y_px + 61 * i, HEIGHT);
        level += 130 * exp(-(dx * dx + dy * dy) / (2 * 1.8 * 1.8));
    }
    return level;
}

static void film(const Scene *scene, const RfPose *pose, gsl_rng *random, uint8_t *luma)
{
    for (int i = 0; i < WIDTH * HEIGHT; i++) {
        double level = level_at(scene, pose, i % WIDTH, i / WIDTH) + droplet_at(scene, i % WIDTH, i / WIDTH) +
                       gsl_ran_gaussian(random, scene->noise_sd);
        luma[i] = (uint8_t)CLAMP(lround(level), 0, 255);
    }
}

typedef struct {
    RfRegistration *registration;
    RfRegistrationScratch *scratch;
    gsl_rng *random;
    uint8_t luma[WIDTH * HEIGHT];
} Bench;

static Bench *bench_new(const Scene *scene)
{
    Bench *bench = g_new0(Bench, 1);
    bench->registration = learn(scene);
    bench->scratch = rf_registration_scratch_new(bench->registration);
    bench->random = gsl_rng_alloc(gsl_rng_mt19937);
    return bench;
}

static void bench_free(Bench *bench)
{
    rf_registration_scratch_free(bench->scratch);
    rf_registration_free(bench->registration);
    gsl_rng_free(bench->random);
    g_free(bench);
}

static bool find(Bench *bench, const Scene *scene, const RfPose *true_pose, RfPose *pose, double *u_px)
{
    film(scene, true_pose, bench->random, bench->luma);
    const RfFrame frame = {
        .luma = bench->luma, .stride_bytes = WIDTH, .width = WIDTH, .height = HEIGHT, .bit_depth = 8};
    return rf_registration_find(bench->registration, bench->scratch, &frame, pose, u_px);
}

/* A camera at rest must never be taken for one that stands a whole spacing further on: a droplet would jump with it. */
static void test_no_slip_by_a_spacing(void)
{
    Bench *bench = bench_new(&GRID);
    const RfPose home = {0};
    for (int i = 0; i < 120; i++) {
        const Scene scene = {.transmission = 0.4, .noise_sd = 1.6, .droplets_y_px = 20 + 1.7 * i};
        RfPose pose;
        g_assert_true(find(bench, &scene, &home, &pose, NULL));
        g_assert_cmpfloat(hypot(pose.shift_x_px, pose.shift_y_px), <, 0.1);
    }
    bench_free(bench);
}

static void test_shift_and_turn(void)
{
    static const RfPose moved[] = {
        {5.3, -3.7, 0.002}, {-0.4, 0.25, -0.001}, {2.1, 7.6, 0}, {-9.2, -6.5, 0.003}};
    Bench *bench = bench_new(&GRID);
    for (size_t i = 0; i < G_N_ELEMENTS(moved); i++) {
        RfPose pose;
        g_assert_true(find(bench, &GRID, &moved[i], &pose, NULL));
        g_assert_cmpfloat_with_epsilon(pose.shift_x_px, moved[i].shift_x_px, 0.06);
        g_assert_cmpfloat_with_epsilon(pose.shift_y_px, moved[i].shift_y_px, 0.06);
        g_assert_cmpfloat_with_epsilon(pose.angle_rad, moved[i].angle_rad, 4e-4);
    }
    bench_free(bench);
}

/* 80 poses, both axes: the spread of errors over the stated sigma has itself a relative sigma of 6 %. The sigma stated is
 * the larger of the two axes', so the spread may be less than 1. */
static void test_sigma_is_honest(void)
{
    Bench *bench = bench_new(&GRID);
    double sum2 = 0;
    enum { POSES = 80 };
    for (int i = 0; i < POSES; i++) {
        const RfPose moved = {3 * sin(1.3 * i), 3 * cos(1.7 * i), 0.001 * sin(i)};
        RfPose pose;
        double u_px;
        g_assert_true(find(bench, &GRID, &moved, &pose, &u_px));
        sum2 += pow((pose.shift_x_px - moved.shift_x_px) / u_px, 2) +
                pow((pose.shift_y_px - moved.shift_y_px) / u_px, 2);
    }
    double spread = sqrt(sum2 / (2 * POSES));
    g_test_message("spread of errors over sigma: %.2f", spread);
    g_assert_cmpfloat(spread, >, 0.6);
    g_assert_cmpfloat(spread, <, 1.3);
    bench_free(bench);
}

/* Lines that run one way leave the picture free to slide along them: the shift is the one across. */
static void test_lines_one_way(void)
{
    const Scene scene = {.transmission = 0.35, .noise_sd = 1.5, .is_horizontal_only = true};
    Bench *bench = bench_new(&scene);
    g_assert_true(rf_registration_is_one_way(bench->registration));
    for (double shift_px = -3; shift_px <= 3; shift_px += 1.5) {
        RfPose pose;
        double u_px;
        g_assert_true(find(bench, &scene, &(RfPose){.shift_x_px = 2, .shift_y_px = shift_px}, &pose, &u_px));
        g_assert_cmpfloat(fabs(pose.shift_x_px), <, 0.01);
        g_assert_cmpfloat(fabs(pose.shift_y_px - shift_px), <, 0.05);
        g_assert_cmpfloat(u_px, <, 0.05);
    }
    bench_free(bench);
}

/* Lines both ways, faint as they may be, hold the picture both ways. */
static void test_faint_grid_is_not_one_way(void)
{
    const Scene scene = {.transmission = 0.8, .noise_sd = 1.5};
    Bench *bench = bench_new(&scene);
    g_assert_false(rf_registration_is_one_way(bench->registration));
    bench_free(bench);
}

static void test_empty_picture_refused(void)
{
    const Scene scene = {.transmission = 1, .noise_sd = 1.5};
    Bench *bench = bench_new(&scene);
    RfPose pose;
    g_assert_false(find(bench, &scene, &(RfPose){0}, &pose, NULL));
    bench_free(bench);
}

int main(int argc, char **argv)
{
    gsl_set_error_handler_off();
    g_test_init(&argc, &argv, NULL);
    g_test_add_func("/registration/find/no-slip-by-a-spacing", test_no_slip_by_a_spacing);
    g_test_add_func("/registration/find/shift-and-turn", test_shift_and_turn);
    g_test_add_func("/registration/find/sigma-is-honest", test_sigma_is_honest);
    g_test_add_func("/registration/find/lines-one-way", test_lines_one_way);
    g_test_add_func("/registration/new/faint-grid-is-not-one-way", test_faint_grid_is_not_one_way);
    g_test_add_func("/registration/find/empty-picture-refused", test_empty_picture_refused);
    return g_test_run();
}
