/* From the sheet to the inputs that all droplets share: gap, voltage, oil, air, laws, each with its sigma. They are common:
 * they don't average out. Not for what they do to a charge: physics/charge_budget.h. */
#pragma once

#include <glib.h>

#include "cli/settings.h"
#include "physics/charge_budget.h"

/* `scale_relative_u`: of the scale along gravity. */
RfChargeInputs rf_conditions_of(const RfSettings *settings, double scale_relative_u);

/* "6.000(10) mm": one line of the budget as people read it. (returns new) */
char *rf_conditions_stated(const RfChargeInputs *inputs, RfChargeLine line);
