/* All pieces of all lines of a reticle at once: centre, angle, periods and radial distortion by weighted least squares with outliers
 * turned down (Tukey's biweight). The model is length_scale.h's; everything in square pixels about the picture's centre. */
#pragma once

#include <glib.h>
#include <stdbool.h>

#include "calib/units.h"

typedef struct {
    bool is_horizontal;
    int index;
    double x_px, y_px;
    double sigma_px; /* across the line */
    double weight;   /* set by the fit: 0 rejected .. 1 */
    double residual_px;
} RfFitPiece;

typedef struct {
    RfValue rotation_rad;
    RfValue k1;                       /* sigma 0: not fitted */
    RfValue period_x_px, period_y_px; /* of the vertical and the horizontal family; sigma 0: no such family */
    double first_x_px, first_y_px;    /* where line 0 of each crosses the normal through the centre */
    double squareness_sigma;          /* of period_y/period_x, with their correlation */
    double residual_px;               /* rms of the pieces kept */
} RfLineFit;

/* fit's values are where to begin: angle, periods (0: no such family) and first lines. Half the picture's diagonal gives k1 its
 * scale. Changes the pieces' weights and residuals. False: the pieces don't determine the model. */
bool rf_line_fit(GArray *pieces, double half_diagonal_px, bool with_k1, RfLineFit *fit);
