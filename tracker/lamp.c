#include "tracker/lamp.h"

#include "tracker/interpolate.h"
#include "tracker/lanes.h"
#include "tracker/luma.h"

#include <math.h>

/* Pixels looked at: enough to know each band's light to a few thousandths, the whole picture's to less than one.
 * Some lie side by side, which saves waiting for memory. */
enum { MOST_ROWS = 4, MOST_COLUMNS = 48, TOGETHER = 4, ROUNDS = 3, ROOM = MOST_ROWS * MOST_COLUMNS };

typedef struct {
    double light_seen, light_light, var_light_light; /* sums: seen * light, light^2, light^2 * var */
    double n;
} Sums;

/* One band's pixels, less the black level, filled up with dark ones. */
typedef struct {
    _Alignas(16) float light[ROOM], seen[ROOM], var[ROOM];
    int n;
} Band;

typedef struct {
    const float *level;
    const RfPixelNoise *noise;
    const RfFrame *frame;
    double cos_angle, sin_angle, pixel_aspect; /* of the pose */
    const RfPose *pose;
    bool is_posed;
} View;

static float level_under_pose(const View *view, int x, int y)
{
    int width = view->frame->width, height = view->frame->height;
    double centre_x = 0.5 * (width - 1), centre_y = 0.5 * (height - 1);
    double right = (x - centre_x - view->pose->shift_x_px) * view->pixel_aspect,
           down = y - centre_y - view->pose->shift_y_px;
    double x_ref = (view->cos_angle * right + view->sin_angle * down) / view->pixel_aspect + centre_x;
    double y_ref = -view->sin_angle * right + view->cos_angle * down + centre_y;
    return rf_interpolate_linear(view->level, width, height, (float)x_ref, (float)y_ref);
}

static void add_row(const View *view, int y, const int *columns, int n, Band *band)
{
    float black = (float)view->noise->black_level;
    const float *level = view->level + (size_t)y * (size_t)view->frame->width;
    float *light = band->light + band->n, *seen = band->seen + band->n;
    const uint8_t *row = rf_luma_row(view->frame, y);
    const uint16_t *wide = (const uint16_t *)(const void *)row;
    for (int i = 0; i < n; i++)
        light[i] = (view->is_posed ? level_under_pose(view, columns[i], y) : level[columns[i]]) - black;
    if (view->frame->bit_depth == 8)
        for (int i = 0; i < n; i++) seen[i] = (float)row[columns[i]] - black;
    else
        for (int i = 0; i < n; i++) seen[i] = (float)wide[columns[i]] - black;
    band->n += n;
}

static void add_noise(const View *view, Band *band)
{
    float read_var = (float)view->noise->read_var, photon = (float)view->noise->photon_var_per_level;
    for (int i = 0; i < band->n; i++)
        band->var[i] = read_var + photon * (band->light[i] > 0 ? band->light[i] : 0);
}

/* Rows `first` to `end` (exclusive) of which every `line_step`-th belongs to the exposure. */
static void take_band(const View *view, int first, int end, int line_step, Band *band)
{
    int lines = (end - first + line_step - 1) / line_step, rows = MIN(lines, MOST_ROWS);
    int columns[MOST_COLUMNS], across = MIN(MOST_COLUMNS, view->frame->width);
    int together = across == MOST_COLUMNS ? TOGETHER : 1, groups = across / together;
    for (int i = 0; i < across; i++)
        columns[i] = (2 * (i / together) + 1) * view->frame->width / (2 * groups) + i % together;
    band->n = 0;
    for (int i = 0; i < rows; i++)
        add_row(view, first + (2 * i + 1) * lines / (2 * rows) * line_step, columns, across, band);
    for (; band->n % RF_LANES_STEP; band->n++) band->light[band->n] = band->seen[band->n] = 0;
    add_noise(view, band);
}

/* Sums over the pixels that lie within `reach` noise sd of what `gain` predicts. */
static Sums sum_band(const Band *band, double gain, double reach)
{
    _Alignas(16) float kept[ROOM], light[ROOM], light_var[ROOM];
    float g = (float)gain, reach2 = (float)(reach * reach);
    for (int i = 0; i < band->n; i++) {
        float off = band->seen[i] - g * band->light[i];
        kept[i] = off * off <= reach2 * band->var[i] && band->light[i] != 0 ? 1.0f : 0.0f;
        light[i] = kept[i] * band->light[i];
        light_var[i] = light[i] * band->var[i];
    }
    return (Sums){
        .light_seen = rf_lanes_total(rf_lanes_dot(light, band->seen, band->n)),
        .light_light = rf_lanes_total(rf_lanes_dot(light, band->light, band->n)),
        .var_light_light = rf_lanes_total(rf_lanes_dot(light_var, band->light, band->n)),
        .n = rf_lanes_total(rf_lanes_dot(kept, kept, band->n)),
    };
}

static double mean_ratio(const Band bands[RF_LAMP_BANDS])
{
    _Alignas(16) float ones[ROOM];
    double light = 0, seen = 0;
    for (int i = 0; i < ROOM; i++) ones[i] = 1;
    for (int i = 0; i < RF_LAMP_BANDS; i++) {
        light += rf_lanes_total(rf_lanes_dot(bands[i].light, ones, bands[i].n));
        seen += rf_lanes_total(rf_lanes_dot(bands[i].seen, ones, bands[i].n));
    }
    return light > 0 ? CLAMP(seen / light, 0.2, 5.0) : 1;
}

/* Are the bands' gains more than noise around the common one? (chi-square with RF_LAMP_BANDS - 1 degrees) */
static bool do_bands_differ(const double gain[], const double var[], double common)
{
    double chi_square = 0;
    for (int i = 0; i < RF_LAMP_BANDS; i++) chi_square += (gain[i] - common) * (gain[i] - common) / var[i];
    double degrees = RF_LAMP_BANDS - 1;
    return chi_square > 4 * degrees; /* far beyond chance: correlated noise must not pass for flicker */
}

void rf_lamp_measure(const float *level, const RfPixelNoise *noise, double pixel_aspect, const RfFrame *frame,
                     const RfPose *pose, int first_line, int line_step, RfLamp *lamp)
{
    View view = {level,
                 noise,
                 frame,
                 cos(pose->angle_rad),
                 sin(pose->angle_rad),
                 pixel_aspect,
                 pose,
                 pose->angle_rad != 0 || pose->shift_x_px != 0 || pose->shift_y_px != 0};
    Band bands[RF_LAMP_BANDS];
    for (int i = 0; i < RF_LAMP_BANDS; i++) {
        int first = frame->height * i / RF_LAMP_BANDS, end = frame->height * (i + 1) / RF_LAMP_BANDS;
        first += (first_line - first % line_step + line_step) % line_step;
        take_band(&view, first, end, line_step, &bands[i]);
    }
    double gain[RF_LAMP_BANDS], var[RF_LAMP_BANDS];
    lamp->gain = mean_ratio(bands);
    for (int round = 0; round < ROUNDS; round++) {
        double light_seen = 0, light_light = 0;
        for (int i = 0; i < RF_LAMP_BANDS; i++) {
            Sums sums = sum_band(&bands[i], round ? gain[i] : lamp->gain, round ? 3.5 : 6);
            bool is_known = sums.n >= 20 && sums.light_light > 0;
            gain[i] = is_known ? sums.light_seen / sums.light_light : lamp->gain;
            var[i] =
                is_known ? MAX(sums.var_light_light / (sums.light_light * sums.light_light), 1e-10) : 1e3;
            light_seen += sums.light_seen;
            light_light += sums.light_light;
        }
        if (light_light > 0) lamp->gain = light_seen / light_light;
    }
    bool is_banded = do_bands_differ(gain, var, lamp->gain);
    for (int i = 0; i < RF_LAMP_BANDS; i++) lamp->band_gain[i] = is_banded ? gain[i] : lamp->gain;
}
