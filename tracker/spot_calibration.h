/* What fitted spots of the sample teach about the fit itself: how noisy pixels under a spot really are (compression takes
 * the noise of quiet places away, but not there), how far that noise is correlated, and how much deeper a reticle line
 * shades a droplet than it shades the background, part of whose light never passed the reticle. */
#pragma once

#include "tracker/exposure_view.h"
#include "tracker/localise.h"
#include "tracker/sightings.h"

#include <glib.h>

typedef struct RfSpotCalibration RfSpotCalibration;

RfSpotCalibration *rf_spot_calibration_new(void);
void rf_spot_calibration_free(RfSpotCalibration *calibration);
G_DEFINE_AUTOPTR_CLEANUP_FUNC(RfSpotCalibration, rf_spot_calibration_free)

/* Keeps the pixels around the exposure's clear, lone spots, up to a few hundred in all. */
void rf_spot_calibration_add(RfSpotCalibration *calibration, const RfExposureView *view, const RfSpot *spots,
                             unsigned n);

typedef struct {
    double var_factor;           /* >= 1: variance under a spot over that of the quiet background */
    double photon_var_per_level; /* >= 0: what the spot's own light adds to the variance, per grey level */
    double u_factor;             /* >= 1: what the noise's correlation adds to the uncertainty of a place */
    double line_depth;           /* >= 1: shade of a droplet over shade of the background; 1 where unknown */
} RfSpotLesson;

/* With too few spots the lesson is that of `localiser`: factors 1, its own photon noise. */
RfSpotLesson rf_spot_calibration_learn(const RfSpotCalibration *calibration, const RfLocaliser *localiser);

/* Transmission for a droplet where the background's is `transmission`. */
static inline double rf_spot_calibration_shade(double line_depth, double transmission)
{
    double shade = 1 - line_depth * (1 - transmission);
    return shade < 0.03 ? 0.03 : shade;
}
