/* Short pieces of ruled lines, each located below a pixel by a least-squares fit of a Gaussian groove on a sloping background.
 * Not for finding the lines: a comb says where to look. */
#pragma once

#include <glib.h>

#include "calib/line_family.h"

typedef struct {
    int index;                  /* of its line on the comb */
    double along_px, across_px; /* in the plane */
    double sigma_px;            /* from the noise in this piece */
} RfLinePiece;

/* RfLinePiece by index, then along; lines that show in too few places to be lines are left out. width_px: full width at half
 * depth. (returns new) */
GArray *rf_line_pieces_locate(const RfLinePlane *plane, const RfLineComb *comb, double *width_px);
