/* Whether what a fit leaves under one spot is only noise there: squared projections of the residuals on the two shapes
 * that vary with twice the angle, which the fit hasn't taken, each in units of its variance under the noise model.
 * Encoders throw away detail as large as a spot while they quieten single pixels, so that the scatter of pixels tells
 * too little. Not for crowded spots: their neighbours' fits are in the residuals. */
#pragma once

#include "tracker/localise.h"

/*  pixels, models   n of each: what was fitted, and the excess that the fit predicts there
 *  offset           of the local background, as fitted
 *  returns          mean of the two: 1 on average where noise is as modelled, and then exponentially distributed;
 *                   0 where nothing can be said */
double rf_spot_excess(const RfLocaliser *localiser, const RfPatchPixel *pixels, const float *models,
                      unsigned n, const RfSpotFit *fit, double offset);
