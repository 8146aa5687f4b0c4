/* What compression adds to the uncertainty of places. The fits' covariances hold for noise that is independent from
 * pixel to pixel; encoders also bend and drag whole spots, differently in pictures coded alone, from the past, and from
 * both sides. How much shows in what the fits leave (spot_excess.h). Displacements are larger than that by a law read
 * from recordings of known truth.
 * The paths can't tell: such errors follow the motion, and look like exposure blur in its covariances. */
#pragma once

#include "tracker/frame.h"
#include "tracker/sightings.h"

/* Variance of a place over that of the fit.
 *   excess     mean over spots, 1 where noise is as modelled
 *   is_smooth  the codec predicts from pictures that it smoothed (H.264 and later), not as decoded (MPEG-2 and earlier)
 *   is_on_line whether a line of the reticle lies under the spot */
double rf_coding_noise_factor(RfCoding coding, bool is_smooth, bool is_on_line, double excess);

/* Multiplies the uncertainties of all spots. Means are taken per picture, apart for spots on lines of the reticle, and drawn towards those of all pictures coded
 * alike as far as the pictures don't differ beyond chance. Returns the root mean square of what they were multiplied
 * by, 1 where nothing is known. */
double rf_coding_noise_apply(RfSightings *sightings, bool is_smooth);
