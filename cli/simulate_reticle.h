/* How much light the reticle lets through at each pixel: lines blurred by the eyepiece and averaged over the pixel,
 * and numerals beside every second horizontal line. Not for where lines are (simulate_view.h). */
#pragma once

#include "cli/simulate_view.h"

typedef struct RfReticle RfReticle;

/* (returns new) line_width_m is as wide as the line before blur; the view is copied. */
RfReticle *rf_simulate_reticle_new(const RfView *view, double line_width_m, double transmission,
                                   bool has_numerals);
void rf_simulate_reticle_free(RfReticle *reticle);
G_DEFINE_AUTOPTR_CLEANUP_FUNC(RfReticle, rf_simulate_reticle_free)

/* map: width*height, 0 (opaque) to 1 (clear), for the camera moved by `pose`. */
void rf_simulate_reticle_draw(const RfReticle *reticle, const RfPose *pose, float *map);

/* Lines of which at least half is inside the picture at rest. */
int rf_simulate_reticle_lines(const RfReticle *reticle);
