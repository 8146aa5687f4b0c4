/* From candidates of one exposure to spots: which are fitted together, which are no spots after all, and whether a
 * neighbour hides in what a fit leaves. */
#pragma once

#include "tracker/exposure_view.h"
#include "tracker/localise.h"
#include "tracker/spot_detector.h"

#define RF_FITTER_MOST_CANDIDATES 2048

typedef struct {
    RfLocaliser localiser;
    double sign;               /* +1 bright spots, -1 dark ones */
    double least_significance; /* peak over its u: less is noise */
    double narrowest_px;       /* less wide is a bad pixel, not a droplet */
    double u_factor;           /* >= 1: what noise correlated between pixels adds to the peak's uncertainty */
    double
        shape_error; /* unitless, >= 0: misfit of the spot's shape that isn't noise, as a share of the peak */
} RfFitterSettings;

typedef struct RfSpotFitter RfSpotFitter; /* memory for one worker */
RfSpotFitter *rf_spot_fitter_new(void);
void rf_spot_fitter_free(RfSpotFitter *fitter);
G_DEFINE_AUTOPTR_CLEANUP_FUNC(RfSpotFitter, rf_spot_fitter_free)

/* Appends RfSpot to `spots`, sorted by y_px then x_px. */
void rf_spot_fitter_run(RfSpotFitter *fitter, const RfFitterSettings *settings, const RfExposureView *view,
                        const RfCandidate *candidates, int n, GArray *spots);
