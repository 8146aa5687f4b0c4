/* Effects on the droplets that aren't in the charge's formula: each with its size and what was done about it. Not for
 * the budget, which holds the uncertainty of what is in the formula. */
#pragma once

#include "cli/results.h"
#include "physics/charge_budget.h"
#include "physics/droplet_set.h"

/* Fills results->effects, and warns of evaporation where the data show it. `set` is in the order of `trails`. */
void rf_effects_state(RfResults *results, const RfTrail *trails, const RfDropletSet *set,
                      const RfChargeInputs *inputs);
