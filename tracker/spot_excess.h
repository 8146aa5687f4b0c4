/* Whether what a fit leaves under one spot is only noise there: the squared projection of the residuals on the shape
 * x y times the spot, which the fit hasn't taken, in units of its variance under the noise model. Encoders throw away
 * detail as large as a spot while they quieten single pixels, so that the scatter of pixels tells too little. The shape
 * is stretched along the picture's diagonals: droplets move along its sides, and their own blur isn't noise.
 * Not for crowded spots: their neighbours' fits are in the residuals. */
#pragma once

#include "tracker/localise.h"

/*  pixels, models   n of each: what was fitted, and the excess that the fit predicts there
 *  offset           of the local background, as fitted
 *  returns          1 on average where noise is as modelled (chi-square of one); 0 where nothing can be said */
double rf_spot_excess(const RfLocaliser *localiser, const RfPatchPixel *pixels, const float *models,
                      unsigned n, const RfSpotFit *fit, double offset);
