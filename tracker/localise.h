/* Where a droplet is, finer than a pixel, and how sure that is: weighted least squares (maximum likelihood for normal
 * noise) of one to a few spots at once over the pixels around them, weights from the noise model. Shaded pixels belong
 * in the fit with their transmission, bad and saturated ones are left out of the list. Not for finding spots.
 * The covariance is the inverse Fisher information (e.g. S. M. Kay, Estimation Theory, 1993, eq. 3.31). */
#pragma once

#include "tracker/spot_shape.h"

#include <glib.h>
#include <stdbool.h>

#define RF_LOCALISE_MOST_SPOTS 5
#define RF_LOCALISE_MOST_PIXELS 4096

/* One pixel that takes part. */
typedef struct {
    float x_px, y_px;
    float excess; /* grey levels above the background */
    float var;    /* of the noise without the spot, grey levels squared */
    float shade;  /* transmission of the reticle there, (0, 1] */
} RfPatchPixel;

typedef struct {
    const RfSpotShape *shape;
    double pixel_aspect;         /* width of a stored pixel over its height */
    double var_factor;           /* > 0: the pixels' variance is this many times `var` */
    double photon_var_per_level; /* >= 0: what the spot's own light adds to the variance, per grey level */
    double
        expected_width_px; /* > 0; loose prior (a factor of two either way) that only matters for faint spots */
} RfLocaliser;

typedef struct {
    double x_px, y_px; /* stored pixels */
    double peak;       /* grey levels, negative if darker than the background */
    double width_px;   /* standard deviation, in units of a pixel's height */
    double var_x_px2, var_y_px2, cov_xy_px2, u_peak;
} RfSpotFit;

typedef struct {
    double chi_square; /* weighted squares of what the fit leaves */
    double offset;     /* of the local background, grey levels */
    bool is_converged;
} RfLocaliseOutcome;

/*  pixels   enough of them around all spots; the same list for all
 *  spots    in: first guesses, n of 1..RF_LOCALISE_MOST_SPOTS; out: fitted, in the same order
 * A spot that runs off, or that the pixels can't hold, leaves is_converged false. No allocation. */
RfLocaliseOutcome rf_localise(const RfLocaliser *localiser, const RfPatchPixel *pixels, unsigned n_pixels,
                              RfSpotFit *spots, unsigned n);

/* Excess that the fitted spots predict at a pixel, shade included. Profiles of the spots as fitted. */
double rf_localise_model(const RfLocaliser *localiser, const RfSpotFit *spots, unsigned n,
                         const RfPatchPixel *pixel);

/* The same for all pixels at once, into `models`. */
void rf_localise_models(const RfLocaliser *localiser, const RfSpotFit *spots, unsigned n,
                        const RfPatchPixel *pixels, unsigned n_pixels, float *models);
