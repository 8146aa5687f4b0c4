/* The pixels around a few spots as the fit wants them: background, lamp and reticle taken into account; bad and
 * saturated pixels left out. Not for deciding what is a spot. */
#pragma once

#include "tracker/exposure_view.h"
#include "tracker/localise.h"

typedef struct {
    double x_px, y_px; /* stored pixels */
    double radius_px;  /* in units of a pixel's height */
} RfWindowDisc;

typedef struct {
    unsigned n;        /* pixels */
    bool is_cut;       /* by the picture's edge */
    bool is_saturated; /* a saturated pixel lies in the inner half of a disc */
    bool has_line;     /* a shaded pixel lies in the inner half of a disc */
} RfWindow;

/* Fills at most RF_LOCALISE_MOST_PIXELS of `pixels` from all discs together, row by row. */
RfWindow rf_spot_window_collect(const RfExposureView *view, const RfWindowDisc *discs, unsigned n,
                                RfPatchPixel *pixels);
