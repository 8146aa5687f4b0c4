#include "cli/simulate_view.h"

#include <math.h>

/* The reticle's origin is put a little off the centre, or the picture would be symmetric to the pixel. */
static const double origin_x_spacings = 0.31, origin_y_spacings = 0.17;

RfView rf_simulate_view_new(const RfScene *scene, const RfWorld *world)
{
    double turn = scene->gravity * (G_PI / 2) + scene->roll_rad;
    return (RfView){
        .width = scene->width,
        .height = scene->height,
        .pixel_aspect = scene->pixel_aspect,
        .scale_px_m = scene->px_per_mm * 1e3,
        .gravity_x = -sin(turn),
        .gravity_y = cos(turn),
        .rotation_rad = scene->rotation_rad,
        .pitch_px = world->spacing_m * scene->px_per_mm * 1e3,
        .lines = scene->lines,
    };
}

static RfPixel to_stored(const RfView *view, double x, double y)
{
    return (RfPixel){x / view->pixel_aspect + 0.5 * (view->width - 1), y + 0.5 * (view->height - 1)};
}

static RfPixel to_square(const RfView *view, RfPixel px)
{
    return (RfPixel){(px.x - 0.5 * (view->width - 1)) * view->pixel_aspect, px.y - 0.5 * (view->height - 1)};
}

RfPixel rf_simulate_view_reference_px(const RfView *view, const RfPlace *place)
{
    double fall_px = place->fall_m * view->scale_px_m, drift_px = place->drift_m * view->scale_px_m;
    return to_stored(view, fall_px * view->gravity_x + drift_px * view->gravity_y,
                     fall_px * view->gravity_y - drift_px * view->gravity_x);
}

RfPlace rf_simulate_view_place(const RfView *view, RfPixel reference_px)
{
    RfPixel p = to_square(view, reference_px);
    return (RfPlace){.fall_m = (p.x * view->gravity_x + p.y * view->gravity_y) / view->scale_px_m,
                     .drift_m = (p.x * view->gravity_y - p.y * view->gravity_x) / view->scale_px_m};
}

RfPixel rf_simulate_view_posed_px(const RfView *view, const RfPose *pose, RfPixel reference_px)
{
    RfPixel p = to_square(view, reference_px);
    double c = cos(pose->angle_rad), s = sin(pose->angle_rad);
    RfPixel q = to_stored(view, c * p.x - s * p.y, s * p.x + c * p.y);
    return (RfPixel){q.x + pose->shift_x_px, q.y + pose->shift_y_px};
}

RfPixel rf_simulate_view_unposed_px(const RfView *view, const RfPose *pose, RfPixel stored_px)
{
    RfPixel p = to_square(view, (RfPixel){stored_px.x - pose->shift_x_px, stored_px.y - pose->shift_y_px});
    double c = cos(pose->angle_rad), s = sin(pose->angle_rad);
    return to_stored(view, c * p.x + s * p.y, c * p.y - s * p.x);
}

void rf_simulate_view_reticle(const RfView *view, RfPixel reference_px, double *along, double *across)
{
    RfPixel p = to_square(view, reference_px);
    double c = cos(view->rotation_rad), s = sin(view->rotation_rad);
    *along = (c * p.x + s * p.y) / view->pitch_px + origin_x_spacings;
    *across = (c * p.y - s * p.x) / view->pitch_px + origin_y_spacings;
}

double rf_simulate_view_fall_spacings(const RfView *view, RfPixel reference_px)
{
    double along, across;
    rf_simulate_view_reticle(view, reference_px, &along, &across);
    if (fabs(view->gravity_y) >= fabs(view->gravity_x)) return view->gravity_y > 0 ? across : -across;
    return view->gravity_x > 0 ? along : -along;
}

bool rf_simulate_view_contains(const RfView *view, RfPixel px, double margin_px)
{
    return px.x >= margin_px && px.y >= margin_px && px.x <= view->width - 1 - margin_px &&
           px.y <= view->height - 1 - margin_px;
}
