/* Between the cell and the picture: roll, direction of gravity, scale, pixel aspect, camera motion, and where the
 * reticle's lines lie. Not for brightness (simulate_render.h). The cell's origin is seen at the picture's centre. */
#pragma once

#include "cli/simulate_motion.h"
#include "tracker/sightings.h"

typedef struct {
    int width, height; /* stored pixels */
    double pixel_aspect;
    double scale_px_m;           /* square pixels, that is stored rows, per metre */
    double gravity_x, gravity_y; /* unit vector in square pixels */
    double rotation_rad;         /* of the reticle, from +x towards +y */
    double pitch_px;             /* between reticle lines, square pixels */
    RfSceneLines lines;
} RfView;

RfView rf_simulate_view_new(const RfScene *scene, const RfWorld *world);

/* Stored pixel in the reference picture (camera at rest). */
RfPixel rf_simulate_view_reference_px(const RfView *view, const RfPlace *place);
RfPlace rf_simulate_view_place(const RfView *view, RfPixel reference_px);

/* What the camera moved by `pose` sees at which stored pixel, and back; RfPose as in tracker/sightings.h. */
RfPixel rf_simulate_view_posed_px(const RfView *view, const RfPose *pose, RfPixel reference_px);
RfPixel rf_simulate_view_unposed_px(const RfView *view, const RfPose *pose, RfPixel stored_px);

/* Along and across the reticle's horizontal lines, in spacings; lines are drawn at whole numbers. */
void rf_simulate_view_reticle(const RfView *view, RfPixel reference_px, double *along, double *across);

/* The reticle coordinate that grows along gravity, in spacings, sign included. */
double rf_simulate_view_fall_spacings(const RfView *view, RfPixel reference_px);

bool rf_simulate_view_contains(const RfView *view, RfPixel px, double margin_px);
