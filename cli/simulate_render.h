/* Draws pictures: background and droplets under a lamp, dimmed by the reticle, blurred by the exposure, with photon
 * and read noise, rounded to whole levels. Plain arithmetic, no picture library. Not for where things are.
 * Grey levels are those of an 8-bit picture until the last rounding. */
#pragma once

#include "cli/simulate_reticle.h"

typedef struct RfRenderer RfRenderer;

typedef struct { /* how well one spot can be seen */
    double snr;  /* peak behind the reticle over the noise of one pixel there */
    double
        bound_px; /* Cramer-Rao bound of its position, rms of both axes; stored pixels; infinite when hidden */
} RfSpotBound;

/* (returns new) The reticle is borrowed. */
RfRenderer *rf_simulate_render_new(const RfScene *scene, const RfReticle *reticle);
void rf_simulate_render_free(RfRenderer *renderer);
G_DEFINE_AUTOPTR_CLEANUP_FUNC(RfRenderer, rf_simulate_render_free)

/* A new exposure: camera moved by `pose`, lamp at `lamp` of its mean brightness. */
void rf_simulate_render_begin(RfRenderer *renderer, const RfPose *pose, double lamp);

/* Adds one droplet: a Gaussian of standard deviation width_px (square pixels) integrated over each pixel, averaged over
 * the n centres (stored pixels) that it had during the exposure. flux: sum over all pixels, grey levels. */
RfSpotBound rf_simulate_render_spot(RfRenderer *renderer, const RfPixel *centres, int n, double flux,
                                    double width_px);

/* Rows first_row, first_row + row_step, ... get their noise and go into the picture; the others stay as they were. */
void rf_simulate_render_finish(RfRenderer *renderer, int first_row, int row_step);

/* The same without noise: mean of many exposures. width*height, grey levels. */
void rf_simulate_render_expected(const RfRenderer *renderer, float *levels);

/* uint8_t, or uint16_t above 8 bit. (borrowed until the next call) */
const void *rf_simulate_render_picture(const RfRenderer *renderer, ptrdiff_t *stride_bytes);
