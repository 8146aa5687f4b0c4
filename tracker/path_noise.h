/* Whether the spots' stated uncertainties are what their scatter says: pooled covariances of the paths' increments.
 * Source: A. J. Berglund, Phys. Rev. E 82 (2010) 011917: increments of a drifting Brownian path have variance
 * 2 D dt (1 - 2 R) + 2 s^2 and neighbours covariance 2 R D dt - s^2. Not for a droplet's own D. */
#pragma once

#include "tracker/chain.h"

RfPathErrors rf_path_noise_measure(const RfLinkScene *scene, const GPtrArray *chains);

/* What stated uncertainties of an axis are multiplied by: its scale where the scales of both axes are above 1 beyond doubt
 * (three sigma of the square), else 1. On one axis alone it is motion: droplets that reverse, air that moves. */
double rf_path_noise_widening(const RfPathErrors *noise, int axis);
