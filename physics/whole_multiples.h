/* Which whole multiple of the known elementary charge is a measured charge, and how sure is that? Not for finding the
 * unit itself: charge_unit.h does that, and must never use this. */
#pragma once

#include "calib/units.h"

typedef struct {
    int n;              /* the most probable signed multiple */
    double probability; /* of n among all integers, flat prior; 0..1 */
    double
        deviation; /* (charge - n e)/sigma, unitless: beyond about 4 no integer fits, however probable the nearest */
} RfWholeMultiple;

/* charge in coulomb, sigma all of its uncertainty (random and common). sigma 0: probability 1, deviation 0 or +/-1e9.
 * Charges beyond 1e9 e are limited there. */
RfWholeMultiple rf_whole_multiples_nearest(RfValue charge_coulomb);
