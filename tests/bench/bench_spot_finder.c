/* What finding and localising costs: CPU ms per frame on one thread and seconds of learning, at three sizes, camera at
 * rest and moving, 10 to 300 droplets on a reticle. Prints figures, judges nothing. Argument: looks per case (60). */
#include <gsl/gsl_errno.h>
#include <gsl/gsl_randist.h>
#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <time.h>

#include "tracker/spot_finder.h"

enum { SAMPLES = 24, KEPT = 6 };

typedef struct {
    int width, height, droplets;
    bool is_moving;
} Case;

typedef struct {
    double x_px, y_px, drift_px;
} Droplet;

static double cpu_s(void)
{
    struct timespec now;
    clock_gettime(CLOCK_PROCESS_CPUTIME_ID, &now);
    return (double)now.tv_sec + 1e-9 * (double)now.tv_nsec;
}

/* Lines every 60 px, soft as a lens draws them, that leave 60 % of the light. */
static double shade_at(double x, double y)
{
    double across = remainder(x, 60), down = remainder(y, 60);
    return (1 - 0.4 * exp(-across * across / 3)) * (1 - 0.4 * exp(-down * down / 3));
}

static void add_droplet(const Case *c, double *light, double x0, double y0, double peak)
{
    const double width = 1.8;
    int left = (int)fmax(0, x0 - 9), right = (int)fmin(c->width - 1, x0 + 9);
    int top = (int)fmax(0, y0 - 9), bottom = (int)fmin(c->height - 1, y0 + 9);
    for (int y = top; y <= bottom; y++)
        for (int x = left; x <= right; x++) {
            double r2 = (x - x0) * (x - x0) + (y - y0) * (y - y0);
            light[(size_t)y * (size_t)c->width + (size_t)x] += peak * exp(-r2 / (2 * width * width));
        }
}

static uint8_t *draw(const Case *c, const Droplet *droplets, int index, gsl_rng *random)
{
    size_t pixels = (size_t)c->width * (size_t)c->height;
    double *light = g_new(double, pixels);
    uint8_t *luma = g_new(uint8_t, pixels);
    double shift_x = c->is_moving ? 3 * sin(0.9 * index) : 0,
           shift_y = c->is_moving ? 2 * cos(0.7 * index) : 0;
    for (size_t i = 0; i < pixels; i++) light[i] = 36;
    for (int i = 0; i < c->droplets; i++)
        add_droplet(c, light, droplets[i].x_px,
                    fmod(droplets[i].y_px + index * droplets[i].drift_px, c->height),
                    20 + 40.0 * i / c->droplets);
    for (int y = 0; y < c->height; y++)
        for (int x = 0; x < c->width; x++) {
            size_t i = (size_t)y * (size_t)c->width + (size_t)x;
            double seen =
                light[i] * shade_at(x - shift_x, y - shift_y) + gsl_ran_gaussian_ziggurat(random, 2);
            luma[i] = (uint8_t)CLAMP(lrint(seen), 0, 255);
        }
    g_free(light);
    return luma;
}

static RfFrame frame_of(const Case *c, const uint8_t *luma, int index)
{
    return (RfFrame){.luma = luma,
                     .stride_bytes = c->width,
                     .width = c->width,
                     .height = c->height,
                     .bit_depth = 8,
                     .index = index,
                     .time_s = index / 30.0};
}

typedef struct {
    double ms, spots;
} Cost;

static Cost look_often(const RfSpotFinder *finder, const Case *c, uint8_t *const *kept, int looks)
{
    g_autoptr(RfSpotScratch) scratch = rf_spot_scratch_new(finder);
    RfLook look;
    double spots = 0;
    rf_look_init(&look);
    double start = cpu_s();
    for (int i = 0; i < looks; i++) {
        RfFrame frame = frame_of(c, kept[i % KEPT], i);
        if (!rf_spot_finder_look(finder, scratch, &frame, 0, &look, NULL)) abort();
        spots += look.spots->len;
    }
    double end = cpu_s();
    rf_look_clear(&look);
    return (Cost){1e3 * (end - start) / looks, spots / looks};
}

static void measure(const Case *c, int looks)
{
    gsl_rng *random = gsl_rng_alloc(gsl_rng_mt19937);
    gsl_rng_set(random, 20260000);
    Droplet *droplets = g_new(Droplet, c->droplets);
    for (int i = 0; i < c->droplets; i++)
        droplets[i] = (Droplet){c->width * gsl_rng_uniform(random), c->height * gsl_rng_uniform(random),
                                20 + 30 * gsl_rng_uniform(random)};
    g_autoptr(RfPictureSample) sample = rf_picture_sample_new(1);
    uint8_t *kept[KEPT];
    for (int i = 0; i < SAMPLES; i++) {
        uint8_t *luma = draw(c, droplets, i, random);
        RfFrame frame = frame_of(c, luma, i);
        if (!rf_picture_sample_add(sample, &frame, NULL)) abort();
        if (i < KEPT)
            kept[i] = luma;
        else
            g_free(luma);
    }
    double start = cpu_s();
    g_autoptr(RfSpotFinder) finder = rf_spot_finder_learn(sample, NULL, NULL);
    double learned = cpu_s() - start;
    if (!finder) abort();
    Cost cost = look_often(finder, c, kept, looks);
    printf("%5d x %-5d %-7s %4d droplets  %8.3f ms/frame  %7.1f spots/frame  learning %6.2f s\n", c->width,
           c->height, c->is_moving ? "moving" : "at rest", c->droplets, cost.ms, cost.spots, learned);
    for (int i = 0; i < KEPT; i++) g_free(kept[i]);
    g_free(droplets);
    gsl_rng_free(random);
}

int main(int argc, char **argv)
{
    static const Case cases[] = {
        {640, 480, 0, false},   {640, 480, 10, false},   {640, 480, 30, false},   {640, 480, 100, false},
        {1280, 720, 30, false}, {1280, 720, 300, false}, {1920, 1080, 30, false}, {1920, 1080, 30, true},
    };
    int looks = argc > 1 ? atoi(argv[1]) : 60;
    gsl_set_error_handler_off();
    for (unsigned i = 0; i < G_N_ELEMENTS(cases); i++) measure(&cases[i], MAX(1, looks));
    return 0;
}
