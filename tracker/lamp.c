#include "tracker/lamp.h"

#include "tracker/interpolate.h"
#include "tracker/luma.h"

#include <math.h>

enum { COLUMN_STEP = 8, ROW_STEP = 2, ROUNDS = 3 };

typedef struct {
    double light_seen, light_light, var_light_light; /* sums: seen * light, light^2, light^2 * var */
    unsigned n;
} Band;

typedef struct {
    const float *level;
    const RfPixelNoise *noise;
    const RfFrame *frame;
    double cos_angle, sin_angle, pixel_aspect; /* of the pose */
    const RfPose *pose;
    bool is_posed;
} View;

static double background_at(const View *view, int x, int y)
{
    int width = view->frame->width, height = view->frame->height;
    if (!view->is_posed) return (double)view->level[(size_t)y * (size_t)width + (size_t)x];
    double centre_x = 0.5 * (width - 1), centre_y = 0.5 * (height - 1);
    double right = (x - centre_x - view->pose->shift_x_px) * view->pixel_aspect,
           down = y - centre_y - view->pose->shift_y_px;
    double x_ref = (view->cos_angle * right + view->sin_angle * down) / view->pixel_aspect + centre_x;
    double y_ref = -view->sin_angle * right + view->cos_angle * down + centre_y;
    return (double)rf_interpolate_linear(view->level, width, height, (float)x_ref, (float)y_ref);
}

/* One band's sums with the pixels that lie within `reach` noise sd of what `gain` predicts. */
static Band sum_band(const View *view, int first_row, int end_row, int row_step, double gain, double reach)
{
    Band band = {0};
    double black = view->noise->black_level;
    for (int y = first_row; y < end_row; y += row_step)
        for (int x = COLUMN_STEP / 2; x < view->frame->width; x += COLUMN_STEP) {
            double light = background_at(view, x, y) - black,
                   seen = (double)rf_luma_at(view->frame, x, y) - black;
            double var = view->noise->read_var + view->noise->photon_var_per_level * MAX(0.0, light);
            double off = seen - gain * light;
            if (off * off > reach * reach * var) continue;
            band.light_seen += light * seen;
            band.light_light += light * light;
            band.var_light_light += light * light * var;
            band.n++;
        }
    return band;
}

static double mean_ratio(const View *view, int first_line, int line_step)
{
    double light = 0, seen = 0, black = view->noise->black_level;
    for (int y = first_line; y < view->frame->height; y += 8 * line_step)
        for (int x = COLUMN_STEP / 2; x < view->frame->width; x += COLUMN_STEP) {
            light += background_at(view, x, y) - black;
            seen += (double)rf_luma_at(view->frame, x, y) - black;
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
    double gain[RF_LAMP_BANDS], var[RF_LAMP_BANDS];
    lamp->gain = mean_ratio(&view, first_line, line_step);
    for (int round = 0; round < ROUNDS; round++) {
        double light_seen = 0, light_light = 0;
        for (int i = 0; i < RF_LAMP_BANDS; i++) {
            int first = frame->height * i / RF_LAMP_BANDS, end = frame->height * (i + 1) / RF_LAMP_BANDS;
            first += (first_line - first % line_step + line_step) % line_step;
            double around = round ? gain[i] : lamp->gain;
            Band band = sum_band(&view, first, end, ROW_STEP * line_step, around, round ? 3.5 : 6);
            bool is_known = band.n >= 20 && band.light_light > 0;
            gain[i] = is_known ? band.light_seen / band.light_light : lamp->gain;
            var[i] =
                is_known ? MAX(band.var_light_light / (band.light_light * band.light_light), 1e-10) : 1e3;
            light_seen += band.light_seen;
            light_light += band.light_light;
        }
        if (light_light > 0) lamp->gain = light_seen / light_light;
    }
    bool is_banded = do_bands_differ(gain, var, lamp->gain);
    for (int i = 0; i < RF_LAMP_BANDS; i++) lamp->band_gain[i] = is_banded ? gain[i] : lamp->gain;
}
