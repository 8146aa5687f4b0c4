/* Measuring with a person's review, and without it for comparison. Not for reading the review: review.h. */
#pragma once

#include "cli/measure.h"

/* As rf_measure_paths, with results->review honoured: cuts and joins before, verdicts after. Where there is a review,
 * results->without has what comes out of the same paths without it. */
bool rf_overrule_measure(RfResults *results, const RfChargeInputs *inputs, const RfSupply *supply,
                         int threads, GError **error);
