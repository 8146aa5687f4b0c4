/* Certified spheres in place of oil: what the whole chain makes of their radius, from the fall and from the spread, against
 * the certificate. Not for deciding what a disagreement comes from. */
#pragma once

#include "cli/results.h"
#include "cli/settings.h"
#include "physics/charge_budget.h"

/* Fills results->certificate from the droplets' rows; nothing to do where the sheet has no certificate. */
bool rf_certificate_check(RfResults *results, const RfSettings *settings, const RfChargeInputs *inputs,
                          GError **error);
