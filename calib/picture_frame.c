#include "calib/picture_frame.h"

#include <math.h>

double rf_picture_frame_direction_rad(RfGravityDirection direction)
{
    switch (direction) {
    case RF_GRAVITY_DOWN:
        return 0.0;
    case RF_GRAVITY_LEFT:
        return M_PI_2;
    case RF_GRAVITY_UP:
        return M_PI;
    case RF_GRAVITY_RIGHT:
        return -M_PI_2;
    }
    return 0.0;
}

/* From the picture's centre, in square pixels: a stored pixel is pixel_aspect wide and 1 high. */
static RfPixel from_centre(const RfPictureFrame *f, RfPixel at)
{
    return (RfPixel){(at.x - 0.5 * (f->width - 1)) * f->pixel_aspect, at.y - 0.5 * (f->height - 1)};
}

static double distortion_per_px2(const RfPictureFrame *f)
{
    double half_x = 0.5 * f->width * f->pixel_aspect, half_y = 0.5 * f->height;
    return f->k1 / (half_x * half_x + half_y * half_y);
}

static RfPixel undistort(const RfPictureFrame *f, RfPixel at)
{
    RfPixel p = from_centre(f, at);
    double stretch = 1.0 + distortion_per_px2(f) * (p.x * p.x + p.y * p.y);
    return (RfPixel){p.x * stretch, p.y * stretch};
}

/* Square pixels turned and scaled. Scales along x and y may differ: they are applied before the turn. */
static RfMetre turn(const RfPictureFrame *f, double x_px, double y_px)
{
    double x_m = x_px / f->pixel_aspect / f->px_per_m_x, y_m = y_px / f->px_per_m_y;
    double c = cos(f->gravity_rad), s = sin(f->gravity_rad);
    return (RfMetre){c * x_m + s * y_m, -s * x_m + c * y_m};
}

RfMetre rf_picture_frame_to_cell(const RfPictureFrame *f, RfPixel at)
{
    RfPixel here = undistort(f, at), origin = undistort(f, (RfPixel){0.0, 0.0});
    return turn(f, here.x - origin.x, here.y - origin.y);
}

void rf_picture_frame_jacobian(const RfPictureFrame *f, RfPixel at, double jacobian[2][2])
{
    RfPixel p = from_centre(f, at);
    double k = distortion_per_px2(f), stretch = 1.0 + k * (p.x * p.x + p.y * p.y);
    double cross = 2.0 * k * p.x * p.y;
    RfMetre along_x = turn(f, f->pixel_aspect * (stretch + 2.0 * k * p.x * p.x), f->pixel_aspect * cross);
    RfMetre along_y = turn(f, cross, stretch + 2.0 * k * p.y * p.y);
    jacobian[0][0] = along_x.x;
    jacobian[1][0] = along_x.y;
    jacobian[0][1] = along_y.x;
    jacobian[1][1] = along_y.y;
}

RfMetre rf_picture_frame_sigma_m(const RfPictureFrame *f, RfPixel at, RfPixel sigma_px)
{
    double j[2][2];
    rf_picture_frame_jacobian(f, at, j);
    return (RfMetre){hypot(j[0][0] * sigma_px.x, j[0][1] * sigma_px.y),
                     hypot(j[1][0] * sigma_px.x, j[1][1] * sigma_px.y)};
}

static bool step_towards(const RfPictureFrame *f, RfMetre goal, RfPixel *guess, double *step_px)
{
    double j[2][2];
    RfMetre here = rf_picture_frame_to_cell(f, *guess);
    rf_picture_frame_jacobian(f, *guess, j);
    double det = j[0][0] * j[1][1] - j[0][1] * j[1][0];
    if (!(det > 0.0)) return false; /* the distortion folds over here */
    double dx_m = goal.x - here.x, dy_m = goal.y - here.y;
    RfPixel step = {(j[1][1] * dx_m - j[0][1] * dy_m) / det, (j[0][0] * dy_m - j[1][0] * dx_m) / det};
    guess->x += step.x;
    guess->y += step.y;
    *step_px = hypot(step.x, step.y);
    return isfinite(*step_px);
}

bool rf_picture_frame_to_picture(const RfPictureFrame *f, RfMetre at, RfPixel *out)
{
    RfPixel guess = {0.5 * (f->width - 1), 0.5 * (f->height - 1)};
    double step_px = HUGE_VAL;
    for (int i = 0; i < 50 && step_px > 1e-9; i++)
        if (!step_towards(f, at, &guess, &step_px)) return false;
    if (step_px > 1e-6 || hypot(guess.x, guess.y) > 3.0 * hypot(f->width, f->height)) return false;
    *out = guess;
    return true;
}
