/* One exposure as the finder works on it: which lines of the frame, where the background lies, how bright the lamp. */
#pragma once

#include "tracker/background.h"
#include "tracker/frame.h"
#include "tracker/lamp.h"
#include "tracker/sightings.h"

#include <math.h>

typedef struct {
    const RfFrame *frame;
    const RfBackground *background;
    int first_line, line_step; /* 0, 1 for a whole frame; 0 or 1, 2 for a field */
    RfPose pose;
    bool is_posed; /* pose isn't zero */
    double cos_angle, sin_angle;
    RfLamp lamp;
} RfExposureView;

/* Place of a stored pixel in the reference picture (see RfPose). */
static inline void rf_exposure_view_reference(const RfExposureView *view, double x_px, double y_px,
                                              double *x_ref_px, double *y_ref_px)
{
    double aspect = view->background->pixel_aspect;
    double centre_x = 0.5 * (view->background->width - 1), centre_y = 0.5 * (view->background->height - 1);
    double right = (x_px - centre_x - view->pose.shift_x_px) * aspect,
           down = y_px - centre_y - view->pose.shift_y_px;
    *x_ref_px = (view->cos_angle * right + view->sin_angle * down) / aspect + centre_x;
    *y_ref_px = -view->sin_angle * right + view->cos_angle * down + centre_y;
}
