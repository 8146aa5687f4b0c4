/* One recording's own unit near a known one, integers summed over: what pooled_unit.h takes the mean of. Everything here is
 * relative: x is the unit over the one nearby, less 1. Not for finding the unit: charge_unit.h does. */
#pragma once

#include <stdbool.h>
#include <stddef.h>

#include "calib/units.h"
#include "physics/charge_comb.h"

/* From the recording's charges alone. False where they leave it open which multiples they are: more than 0.01 of the
 * posterior within 15 % lies elsewhere, or its sigma is above 3 %. */
bool rf_recording_unit_alone(const RfCombCharge *charges, size_t n, double nearby_coulomb, RfValue *x);

/* With a prior for x, which is divided out of the answer again: what the charges add to it. False where they add less than
 * a hundredth of what the prior knows. */
bool rf_recording_unit_given(const RfCombCharge *charges, size_t n, double nearby_coulomb, RfValue prior,
                             RfValue *x);
