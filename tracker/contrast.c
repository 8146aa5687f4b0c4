#include "tracker/contrast.h"

#include "tracker/luma.h"
#include "tracker/wide.h"

#include <math.h>

struct RfContrast {
    const RfBackground *background;
    int width, height; /* in cells */
    float *light
        [3]; /* mean light (level less black) per cell: of the whole cell, of its upper, of its lower line */
    float *per_sd; /* 1 / noise sd of one pixel, 0 in cells with a bad pixel; camera at rest */
    /* moving camera, in the reference picture's place: */
    uint16_t
        *box; /* mean level of the 2 x 2 pixels from each pixel on, in units; small, for the cache's sake */
    float *box_per_sd; /* per cell: 1 / sd, less where the picture is steep: registration isn't perfect */
    uint8_t *is_bad;   /* cell of the frame holds a bad sensor pixel */
};

enum { WHOLE, UPPER, LOWER };
enum { RUN = 16, FULL_BITS = 14 };
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

static double box_units(const RfBackground *b)
{
    return ldexp(1, FULL_BITS - b->bit_depth);
}

/* 1 / sd of a box from pixel (x, y) on. */
static float box_per_sd(const RfBackground *b, int x, int y)
{
    int right = MIN(x + 1, b->width - 1), down = MIN(y + 1, b->height - 1);
    const float *row = b->level + (size_t)y * (size_t)b->width,
                *next = b->level + (size_t)down * (size_t)b->width;
    float mean = 0.25f * (row[x] + row[right] + next[x] + next[right]);
    float steep_x = 0.5f * (row[right] + next[right] - row[x] - next[x]),
          steep_y = 0.5f * (next[x] + next[right] - row[x] - row[right]);
    double var = rf_pixel_noise_var(&b->noise, (double)mean);
    /* 4: it is that of one pixel of four */
    var += 4 * POSE_ERROR_PX * POSE_ERROR_PX * (double)(steep_x * steep_x + steep_y * steep_y);
    return (float)(1 / sqrt(var));
}

static void fill_box(RfContrast *contrast)
{
    const RfBackground *b = contrast->background;
    int w = b->width, h = b->height;
    float quarter = (float)(0.25 * box_units(b));
    for (int y = 0; y < h; y++) {
        const float *row = b->level + (size_t)y * (size_t)w, *next = y < h - 1 ? row + w : row;
        for (int x = 0; x < w; x++) {
            int right = x + (x < w - 1);
            float mean = quarter * (row[x] + row[right] + next[x] + next[right]);
            contrast->box[(size_t)y * (size_t)w + (size_t)x] = (uint16_t)(CLAMP(mean, 0.0f, 65000.0f) + 0.5f);
        }
    }
    for (int y = 0; y < contrast->height; y++)
        for (int x = 0; x < contrast->width; x++) {
            float upper = fminf(box_per_sd(b, 2 * x, 2 * y), box_per_sd(b, 2 * x + 1, 2 * y)),
                  lower = fminf(box_per_sd(b, 2 * x, 2 * y + 1), box_per_sd(b, 2 * x + 1, 2 * y + 1));
            contrast->box_per_sd[(size_t)y * (size_t)contrast->width + (size_t)x] = fminf(upper, lower);
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
        contrast->box = g_new(uint16_t, pixels);
        contrast->box_per_sd = g_new(float, cells);
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
static RF_WITHIN void sum_row_bytes(const uint8_t *upper, const uint8_t *lower, int width, float *out)
{
    if (lower)
        for (int x = 0; x < width; x++)
            out[x] = (float)(upper[2 * x] + upper[2 * x + 1] + lower[2 * x] + lower[2 * x + 1]);
    else
        for (int x = 0; x < width; x++) out[x] = (float)(upper[2 * x] + upper[2 * x + 1]);
}

static RF_WITHIN void sum_row_words(const uint16_t *upper, const uint16_t *lower, int width, float *out)
{
    for (int x = 0; x < width; x++)
        out[x] = (float)(upper[2 * x] + upper[2 * x + 1] + (lower ? lower[2 * x] + lower[2 * x + 1] : 0));
}

static RF_WITHIN void sum_row(const RfExposureView *view, int cell_row, int width, float *out)
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

static RF_WITHIN void weigh_row(const float *light, const float *per_sd, int width, float pixels, float black,
                                float gain, float scale, float *row)
{
    for (int x = 0; x < width; x++)
        row[x] = (row[x] - pixels * (gain * light[x] + black)) * per_sd[x] * scale;
}

/* Where a row of cells lies in the reference picture: cell x at (x_px + x * step_x, y_px + x * step_y). */
typedef struct {
    double x_px, y_px, step_x, step_y;
} Line;

static Line reference_line(const RfExposureView *view, int y)
{
    double upper_left = 2 * y + (view->line_step == 2 ? view->first_line - 0.5 : 0), x1, y1;
    Line line;
    rf_exposure_view_reference(view, 0, upper_left, &line.x_px, &line.y_px);
    rf_exposure_view_reference(view, 2, upper_left, &x1, &y1);
    line.step_x = x1 - line.x_px;
    line.step_y = y1 - line.y_px;
    return line;
}

/* Linear between box means, which are smooth enough for that. */
static RF_WITHIN void light_of_run(const RfContrast *contrast, const Line *line, int x, float black,
                                   float *light)
{
    const RfBackground *b = contrast->background;
    double at_x = line->x_px + x * line->step_x, at_y = line->y_px + x * line->step_y;
    int column = (int)at_x, row = (int)at_y;
    const uint16_t *upper = contrast->box + (size_t)row * (size_t)b->width + (size_t)column,
                   *lower = upper + b->width;
    float part_x = (float)(at_x - column), part_y = (float)(at_y - row), per_unit = (float)(1 / box_units(b));
    float grow_x = (float)line->step_x - 2, grow_y = (float)line->step_y;
    for (int i = 0; i < RUN; i++) {
        float tx = part_x + (float)i * grow_x, ty = part_y + (float)i * grow_y;
        float a = (float)upper[2 * i], c = (float)lower[2 * i];
        float above = a + tx * ((float)upper[2 * i + 1] - a), below = c + tx * ((float)lower[2 * i + 1] - c);
        light[i] = (above + ty * (below - above)) * per_unit - black;
    }
}

static bool light_of_one(const RfContrast *contrast, double at_x, double at_y, float black, float *light)
{
    const RfBackground *b = contrast->background;
    if (!(at_x >= 0 && at_y >= 0 && at_x < b->width - 2 && at_y < b->height - 2)) return false;
    int column = (int)at_x, row = (int)at_y;
    const uint16_t *upper = contrast->box + (size_t)row * (size_t)b->width + (size_t)column,
                   *lower = upper + b->width;
    float tx = (float)(at_x - column), ty = (float)(at_y - row), a = upper[0], c = lower[0];
    float above = a + tx * ((float)upper[1] - a), below = c + tx * ((float)lower[1] - c);
    *light = (above + ty * (below - above)) / (float)box_units(b) - black;
    return true;
}

/* Do the places of RUN cells from x on lie side by side, all inside? */
static bool is_one_run(const RfContrast *contrast, const Line *line, int x)
{
    const RfBackground *b = contrast->background;
    double x0 = line->x_px + x * line->step_x, y0 = line->y_px + x * line->step_y;
    double x1 = x0 + (RUN - 1) * line->step_x, y1 = y0 + (RUN - 1) * line->step_y;
    return x + RUN <= contrast->width && x0 >= 0 && x1 < b->width - 3 && fmin(y0, y1) >= 0 &&
           fmax(y0, y1) < b->height - 2 && (int)x1 - (int)x0 == 2 * (RUN - 1) && (int)y0 == (int)y1;
}

static const float *per_sd_at(const RfContrast *contrast, double at_x, double at_y, int cells)
{
    int x = CLAMP((int)(0.5 * at_x), 0, contrast->width - cells),
        y = CLAMP((int)(0.5 * at_y), 0, contrast->height - 1);
    return contrast->box_per_sd + (size_t)y * (size_t)contrast->width + (size_t)x;
}

static RF_WITHIN void weigh_posed_row(const RfContrast *contrast, const RfExposureView *view, int y,
                                      float pixels, float gain, float scale, float *row)
{
    float black = (float)contrast->background->noise.black_level;
    const uint8_t *is_bad = contrast->is_bad + (size_t)y * (size_t)contrast->width;
    Line line = reference_line(view, y);
    for (int x = 0; x < contrast->width;) {
        float light[RUN];
        double at_x = line.x_px + x * line.step_x, at_y = line.y_px + x * line.step_y;
        if (is_one_run(contrast, &line, x)) {
            light_of_run(contrast, &line, x, black, light);
            weigh_row(light, per_sd_at(contrast, at_x, at_y, RUN), RUN, pixels, black, gain, scale, row + x);
            x += RUN;
        } else {
            if (light_of_one(contrast, at_x, at_y, black, light))
                weigh_row(light, per_sd_at(contrast, at_x, at_y, 1), 1, pixels, black, gain, scale, row + x);
            else
                row[x] = 0;
            x++;
        }
    }
    for (int x = 0; x < contrast->width; x++)
        if (is_bad[x]) row[x] = 0;
}

RF_WIDE void rf_contrast_fill(const RfContrast *contrast, const RfExposureView *view, double sign,
                              float *picture)
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
