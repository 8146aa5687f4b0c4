#include "cli/simulate_render.h"

#include <gsl/gsl_randist.h>
#include <math.h>
#include <string.h>

enum { NOISE_NUMBERS = 1 << 21, LEVELS_PER_GREY = 8, GREYS = 256 };

struct RfRenderer {
    const RfReticle *reticle;
    int width, height, bit_depth;
    double pixel_aspect;
    double background, gradient; /* grey levels; gradient from the top left corner to the bottom right one */
    double lamp;
    RfPose pose;
    bool has_map;
    float *base;  /* background under a lamp of 1 */
    float *map;   /* transmission of the reticle */
    float *spots; /* light of the droplets */
    float *hot;   /* added behind the reticle */
    double photons_per_level, read_noise;
    float *spread; /* noise against expected level, LEVELS_PER_GREY to a grey level */
    float *noise;  /* NOISE_NUMBERS Gaussian numbers, read from a random place for every row */
    gsl_rng *random;
    GArray *patch; /* double: one spot and its two slopes */
    GArray *edges; /* double */
    void *picture;
};

static double noise_sd(const RfRenderer *r, double level)
{
    return sqrt(MAX(level, 0) / r->photons_per_level + r->read_noise * r->read_noise);
}

static void fill_base(RfRenderer *r)
{
    for (int y = 0; y < r->height; y++)
        for (int x = 0; x < r->width; x++) {
            double place = 0.5 * ((double)x / r->width + (double)y / r->height) - 0.5;
            double level = r->background + r->gradient * place;
            r->base[(size_t)y * (size_t)r->width + (size_t)x] = (float)MAX(level, 0);
        }
}

static void fill_noise(RfRenderer *r)
{
    for (int i = 0; i < NOISE_NUMBERS; i++) r->noise[i] = (float)gsl_ran_gaussian_ziggurat(r->random, 1);
    for (int i = 0; i < GREYS * LEVELS_PER_GREY; i++)
        r->spread[i] = (float)noise_sd(r, (i + 0.5) / LEVELS_PER_GREY);
}

static void place_hot_pixels(RfRenderer *r, const RfScene *scene)
{
    gsl_rng *random = rf_simulate_world_stream(scene, RF_STREAM_PICTURE);
    size_t pixels = (size_t)r->width * (size_t)r->height;
    for (int i = 0; i < scene->hot_pixels; i++)
        r->hot[gsl_rng_uniform_int(random, pixels)] += (float)(20 + 150 * gsl_rng_uniform(random));
    gsl_rng_free(random);
}

RfRenderer *rf_simulate_render_new(const RfScene *scene, const RfReticle *reticle)
{
    RfRenderer *r = g_new0(RfRenderer, 1);
    size_t pixels = (size_t)scene->width * (size_t)scene->height;
    *r = (RfRenderer){.reticle = reticle,
                      .width = scene->width,
                      .height = scene->height,
                      .bit_depth = scene->bit_depth,
                      .pixel_aspect = scene->pixel_aspect,
                      .background = scene->background,
                      .gradient = scene->gradient,
                      .lamp = 1,
                      .photons_per_level = scene->photons_per_level,
                      .read_noise = scene->read_noise};
    r->base = g_new0(float, pixels);
    r->map = g_new0(float, pixels);
    r->spots = g_new0(float, pixels);
    r->hot = g_new0(float, pixels);
    r->spread = g_new0(float, GREYS *LEVELS_PER_GREY);
    r->noise = g_new0(float, NOISE_NUMBERS);
    r->random = rf_simulate_world_stream(scene, RF_STREAM_NOISE);
    r->patch = g_array_new(FALSE, FALSE, sizeof(double));
    r->edges = g_array_new(FALSE, FALSE, sizeof(double));
    r->picture = g_malloc0(pixels * (scene->bit_depth > 8 ? 2 : 1));
    fill_base(r);
    fill_noise(r);
    place_hot_pixels(r, scene);
    return r;
}

void rf_simulate_render_free(RfRenderer *r)
{
    if (!r) return;
    g_free(r->base);
    g_free(r->map);
    g_free(r->spots);
    g_free(r->hot);
    g_free(r->spread);
    g_free(r->noise);
    gsl_rng_free(r->random);
    g_array_unref(r->patch);
    g_array_unref(r->edges);
    g_free(r->picture);
    g_free(r);
}

void rf_simulate_render_begin(RfRenderer *r, const RfPose *pose, double lamp)
{
    bool has_moved = !r->has_map || pose->shift_x_px != r->pose.shift_x_px ||
                     pose->shift_y_px != r->pose.shift_y_px || pose->angle_rad != r->pose.angle_rad;
    if (has_moved) rf_simulate_reticle_draw(r->reticle, pose, r->map);
    r->has_map = true;
    r->pose = *pose;
    r->lamp = lamp;
    memset(r->spots, 0, sizeof(float) * (size_t)r->width * (size_t)r->height);
}

typedef struct { /* pixels that a spot can reach, clipped to the picture */
    int x0, y0, columns, rows;
} Window;

static Window window_of(const RfRenderer *r, const RfPixel *centres, int n, double reach_x, double reach_y)
{
    double left = HUGE_VAL, right = -HUGE_VAL, top = HUGE_VAL, bottom = -HUGE_VAL;
    for (int i = 0; i < n; i++) {
        left = MIN(left, centres[i].x);
        right = MAX(right, centres[i].x);
        top = MIN(top, centres[i].y);
        bottom = MAX(bottom, centres[i].y);
    }
    double x0 = MAX(0, floor(left - reach_x)), x1 = MIN(r->width - 1, ceil(right + reach_x));
    double y0 = MAX(0, floor(top - reach_y)), y1 = MIN(r->height - 1, ceil(bottom + reach_y));
    if (x1 < x0 || y1 < y0) return (Window){0};
    return (Window){(int)x0, (int)y0, (int)(x1 - x0) + 1, (int)(y1 - y0) + 1};
}

/* Gaussian of unit sum in each of n pixels from `first` on, and the slope of that against the centre. */
static void integrate_line(double *share, double *slope, int first, int n, double centre, double sd)
{
    double norm = 1 / (sd * sqrt(2 * G_PI));
    double z = (first - 0.5 - centre) / sd, p = 0.5 * erf(z / G_SQRT2), g = norm * exp(-0.5 * z * z);
    for (int i = 0; i < n; i++) {
        double next_z = (first + i + 0.5 - centre) / sd;
        double next_p = 0.5 * erf(next_z / G_SQRT2), next_g = norm * exp(-0.5 * next_z * next_z);
        share[i] = next_p - p;
        slope[i] = g - next_g;
        p = next_p;
        g = next_g;
    }
}

/* patch: three planes, the spot and its slopes along x and y */
static void add_at_centre(RfRenderer *r, Window w, RfPixel centre, double flux, double sd_x, double sd_y)
{
    double *ex = (double *)(void *)r->edges->data, *gx = ex + w.columns, *ey = gx + w.columns,
           *gy = ey + w.rows;
    double *patch = (double *)(void *)r->patch->data;
    size_t plane = (size_t)w.columns * (size_t)w.rows;
    integrate_line(ex, gx, w.x0, w.columns, centre.x, sd_x);
    integrate_line(ey, gy, w.y0, w.rows, centre.y, sd_y);
    for (int j = 0; j < w.rows; j++)
        for (int i = 0; i < w.columns; i++) {
            double *at = patch + (size_t)j * (size_t)w.columns + (size_t)i;
            at[0] += flux * ex[i] * ey[j];
            at[plane] += flux * gx[i] * ey[j];
            at[2 * plane] += flux * ex[i] * gy[j];
        }
}

/* Information about the position in pixels of independent, nearly Gaussian noise; that the noise itself depends on the
 * position is left out (its share is below 1 % at these levels). Neighbouring droplets are left out too. */
static RfSpotBound add_patch(RfRenderer *r, Window w)
{
    const double *patch = (const double *)(const void *)r->patch->data;
    size_t plane = (size_t)w.columns * (size_t)w.rows;
    double xx = 0, yy = 0, xy = 0;
    RfSpotBound seen = {.snr = 0, .bound_px = HUGE_VAL};
    for (size_t k = 0; k < plane; k++) {
        size_t at = (size_t)(w.y0 + (int)(k / (size_t)w.columns)) * (size_t)r->width + (size_t)w.x0 +
                    k % (size_t)w.columns;
        double light = r->lamp * patch[k], map = (double)r->map[at];
        double sd = noise_sd(r, map * (r->lamp * (double)r->base[at] + light));
        double dx = r->lamp * map * patch[k + plane], dy = r->lamp * map * patch[k + 2 * plane];
        r->spots[at] += (float)light;
        xx += dx * dx / (sd * sd);
        yy += dy * dy / (sd * sd);
        xy += dx * dy / (sd * sd);
        seen.snr = MAX(seen.snr, map * light / noise_sd(r, map * r->lamp * (double)r->base[at]));
    }
    double determinant = xx * yy - xy * xy;
    if (determinant > 0) seen.bound_px = sqrt(0.5 * (xx + yy) / determinant);
    return seen;
}

RfSpotBound rf_simulate_render_spot(RfRenderer *r, const RfPixel *centres, int n, double flux,
                                    double width_px)
{
    double sd_x = width_px / r->pixel_aspect, sd_y = width_px;
    Window w = window_of(r, centres, n, 5 * sd_x + 1, 5 * sd_y + 1);
    if (w.columns == 0) return (RfSpotBound){.snr = 0, .bound_px = HUGE_VAL};
    size_t numbers = 3 * (size_t)w.columns * (size_t)w.rows;
    g_array_set_size(r->patch, (guint)numbers);
    g_array_set_size(r->edges, (guint)(2 * (w.columns + w.rows)));
    memset(r->patch->data, 0, numbers * sizeof(double));
    for (int i = 0; i < n; i++) add_at_centre(r, w, centres[i], flux / n, sd_x, sd_y);
    return add_patch(r, w);
}

static float expected_level(const RfRenderer *r, size_t at, float lamp)
{
    return (r->base[at] * lamp + r->spots[at]) * r->map[at] + r->hot[at];
}

void rf_simulate_render_expected(const RfRenderer *r, float *levels)
{
    for (size_t at = 0; at < (size_t)r->width * (size_t)r->height; at++)
        levels[at] = expected_level(r, at, (float)r->lamp);
}

static void finish_row(RfRenderer *r, int y)
{
    const float *noise = r->noise + gsl_rng_uniform_int(r->random, (unsigned long)(NOISE_NUMBERS - r->width));
    size_t row = (size_t)y * (size_t)r->width;
    float lamp = (float)r->lamp, scale = (float)(1 << (r->bit_depth - 8));
    float top = scale * GREYS - 1;
    for (int x = 0; x < r->width; x++) {
        float level = expected_level(r, row + (size_t)x, lamp);
        int entry = MIN((int)(level * LEVELS_PER_GREY), GREYS * LEVELS_PER_GREY - 1);
        level = (level + r->spread[entry] * noise[x]) * scale + 0.5f;
        level = level < 0 ? 0 : level > top ? top : level;
        if (r->bit_depth > 8)
            ((uint16_t *)r->picture)[row + (size_t)x] = (uint16_t)level;
        else
            ((uint8_t *)r->picture)[row + (size_t)x] = (uint8_t)level;
    }
}

void rf_simulate_render_finish(RfRenderer *r, int first_row, int row_step)
{
    for (int y = first_row; y < r->height; y += row_step) finish_row(r, y);
}

const void *rf_simulate_render_picture(const RfRenderer *r, ptrdiff_t *stride_bytes)
{
    *stride_bytes = (ptrdiff_t)r->width * (r->bit_depth > 8 ? 2 : 1);
    return r->picture;
}
