/* The inputs that all droplets of a recording share, one by one, and which measurement each is: a name from the sheet's
 * [shared] group makes it one and the same in all recordings that use the name; a law is the same wherever it is used.
 * Lines of the budget that hold several (scale: spacing, plane ratio, the fit of the lines) are taken apart. Not for what
 * they do to a charge: physics/charge_budget.h. */
#pragma once

#include "cli/results.h"
#include "cli/settings.h"

/* Fills results->common. `inputs` as the budget has them. Warns of names for what charges don't hang on. */
void rf_common_inputs_state(RfResults *results, const RfSettings *settings, const RfChargeInputs *inputs);
/* A shrinkage that was taken off all paths: known only once they are measured. */
void rf_common_inputs_add_evaporation(RfResults *results, RfValue k_m2_s);
