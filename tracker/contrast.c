#include "tracker/contrast.h"

#include "tracker/interpolate.h"
#include "tracker/luma.h"

#include <math.h>

struct RfContrast {
    const RfBackground *background;
    int width, height; /* in cells */
    float *light
        [3]; /* mean light (level less black) per cell: of the whole cell, of its upper, of its lower line */
    float *per_sd; /* 1 / noise sd of one pixel, 0 in cells with a bad pixel; camera at rest */
    float *box;    /* moving camera: mean light of the 2 x 2 pixels from each stored pixel on */
    float *
        box_per_sd; /* the same place's 1 / sd, less where the picture is steep: registration isn't perfect */
    uint8_t *is_bad; /* moving camera: cell holds a bad sensor pixel */
};

enum { WHOLE, UPPER, LOWER };
static const double POSE_ERROR_PX = 0.06; /* taken for registration and interpolation together */

int rf_contrast_width(const RfContrast *contrast)
{
    return contrast->width;
}

int rf_contrast_height(const RfContrast *contrast)
{
    return contrast->height;
}

static void fill_cells(RfContrast *contrast)
{
    const RfBackground *b = contrast->background;
    float black = (float)b->noise.black_level;
    for (int y = 0; y < contrast->height; y++)
        for (int x = 0; x < contrast->width; x++) {
            size_t i = (size_t)(2 * y) * (size_t)b->width + (size_t)(2 * x),
                   cell = (size_t)y * (size_t)contrast->width + (size_t)x;
            size_t w = (size_t)b->width;
            contrast->light[UPPER][cell] = 0.5f * (b->level[i] + b->level[i + 1]) - black;
            contrast->light[LOWER][cell] = 0.5f * (b->level[i + w] + b->level[i + w + 1]) - black;
            contrast->light[WHOLE][cell] =
                0.5f * (contrast->light[UPPER][cell] + contrast->light[LOWER][cell]);
            uint8_t flags = b->sensor_flags[i] | b->sensor_flags[i + 1] | b->sensor_flags[i + w] |
                            b->sensor_flags[i + w + 1];
            contrast->is_bad[cell] = (flags & RF_PIXEL_BAD) != 0;
            double var = rf_pixel_noise_var(&b->noise, (double)(contrast->light[WHOLE][cell] + black));
            contrast->per_sd[cell] = contrast->is_bad[cell] ? 0 : (float)(1 / sqrt(var));
        }
}

static void fill_box(RfContrast *contrast)
{
    const RfBackground *b = contrast->background;
    int w = b->width, h = b->height;
    float black = (float)b->noise.black_level;
    for (int y = 0; y < h; y++)
        for (int x = 0; x < w; x++) {
            int right = x + (x < w - 1), down = y + (y < h - 1);
            const float *row = b->level + (size_t)y * (size_t)w, *next = b->level + (size_t)down * (size_t)w;
            size_t i = (size_t)y * (size_t)w + (size_t)x;
            contrast->box[i] = 0.25f * (row[x] + row[right] + next[x] + next[right]) - black;
            double steep = hypot((double)(row[right] + next[right] - row[x] - next[x]) / 2,
                                 (double)(next[x] + next[right] - row[x] - row[right]) / 2);
            double var = rf_pixel_noise_var(&b->noise, (double)(contrast->box[i] + black));
            var += 4 * POSE_ERROR_PX * POSE_ERROR_PX * steep *
                   steep; /* 4: `per_sd` is that of one pixel of four */
            contrast->box_per_sd[i] = (float)(1 / sqrt(var));
        }
}

RfContrast *rf_contrast_new(const RfBackground *background)
{
    RfContrast *contrast = g_new0(RfContrast, 1);
    contrast->background = background;
    contrast->width = background->width / 2;
    contrast->height = background->height / 2;
    size_t cells = (size_t)contrast->width * (size_t)contrast->height;
    size_t pixels = (size_t)background->width * (size_t)background->height;
    for (int i = 0; i < 3; i++) contrast->light[i] = g_new(float, cells);
    contrast->per_sd = g_new(float, cells);
    contrast->is_bad = g_new(uint8_t, cells);
    fill_cells(contrast);
    if (background->is_moving) {
        contrast->box = g_new(float, pixels);
        contrast->box_per_sd = g_new(float, pixels);
        fill_box(contrast);
    }
    return contrast;
}

void rf_contrast_free(RfContrast *contrast)
{
    if (!contrast) return;
    for (int i = 0; i < 3; i++) g_free(contrast->light[i]);
    g_free(contrast->per_sd);
    g_free(contrast->is_bad);
    g_free(contrast->box);
    g_free(contrast->box_per_sd);
    g_free(contrast);
}

/* Sums of the cells' pixels in one row of cells: four pixels each, or two of a field. */
static void sum_row_bytes(const uint8_t *upper, const uint8_t *lower, int width, float *out)
{
    if (lower)
        for (int x = 0; x < width; x++)
            out[x] = (float)(upper[2 * x] + upper[2 * x + 1] + lower[2 * x] + lower[2 * x + 1]);
    else
        for (int x = 0; x < width; x++) out[x] = (float)(upper[2 * x] + upper[2 * x + 1]);
}

static void sum_row_words(const uint16_t *upper, const uint16_t *lower, int width, float *out)
{
    for (int x = 0; x < width; x++)
        out[x] = (float)(upper[2 * x] + upper[2 * x + 1] + (lower ? lower[2 * x] + lower[2 * x + 1] : 0));
}

static void sum_row(const RfExposureView *view, int cell_row, int width, float *out)
{
    const RfFrame *frame = view->frame;
    bool is_field = view->line_step == 2;
    const uint8_t *upper = rf_luma_row(frame, 2 * cell_row + (is_field ? view->first_line : 0));
    const uint8_t *lower = is_field ? NULL : rf_luma_row(frame, 2 * cell_row + 1);
    if (frame->bit_depth == 8)
        sum_row_bytes(upper, lower, width, out);
    else
        sum_row_words((const uint16_t *)(const void *)upper, (const uint16_t *)(const void *)lower, width,
                      out);
}

static void weigh_row(const float *light, const float *per_sd, int width, float pixels, float black,
                      float gain, float scale, float *row)
{
    for (int x = 0; x < width; x++)
        row[x] = (row[x] - pixels * (gain * light[x] + black)) * per_sd[x] * scale;
}

/* The background under a moving camera: linear between the box means, which are smooth enough for that. */
static void weigh_posed_row(const RfContrast *contrast, const RfExposureView *view, int y, float pixels,
                            float gain, float scale, float *row)
{
    const RfBackground *b = contrast->background;
    float black = (float)b->noise.black_level;
    double line =
        2 * y + (view->line_step == 2 ? view->first_line - 0.5 : 0); /* upper left pixel of the box */
    double x0, y0, x1, y1;
    rf_exposure_view_reference(view, 0, line, &x0, &y0);
    rf_exposure_view_reference(view, 2, line, &x1, &y1);
    for (int x = 0; x < contrast->width; x++) {
        float at_x = (float)(x0 + x * (x1 - x0)), at_y = (float)(y0 + x * (y1 - y0));
        bool is_outside =
            at_x < 0 || at_y < 0 || at_x > (float)(b->width - 2) || at_y > (float)(b->height - 2);
        if (is_outside || contrast->is_bad[(size_t)y * (size_t)contrast->width + (size_t)x]) {
            row[x] = 0;
            continue;
        }
        float light = rf_interpolate_linear(contrast->box, b->width, b->height, at_x, at_y);
        float per_sd = contrast->box_per_sd[(size_t)(at_y + 0.5f) * (size_t)b->width + (size_t)(at_x + 0.5f)];
        row[x] = (row[x] - pixels * (gain * light + black)) * per_sd * scale;
    }
}

void rf_contrast_fill(const RfContrast *contrast, const RfExposureView *view, double sign, float *picture)
{
    bool is_field = view->line_step == 2;
    float pixels = is_field ? 2 : 4, black = (float)contrast->background->noise.black_level;
    const float *light = contrast->light[!is_field ? WHOLE : view->first_line ? LOWER : UPPER];
    for (int y = 0; y < contrast->height; y++) {
        float *row = picture + (size_t)y * (size_t)contrast->width;
        float gain = (float)rf_lamp_gain(&view->lamp, 2 * y + 0.5, view->frame->height);
        float scale = (float)(sign / sqrt((double)pixels));
        sum_row(view, y, contrast->width, row);
        if (view->is_posed)
            weigh_posed_row(contrast, view, y, pixels, gain, scale, row);
        else
            weigh_row(light + (size_t)y * (size_t)contrast->width,
                      contrast->per_sd + (size_t)y * (size_t)contrast->width, contrast->width, pixels, black,
                      gain, scale, row);
    }
}
