/* What is said of the droplets once they are measured: accepted or set aside and why, the whole multiple, the unit from
 * the accepted charges, the budget, the verdict of the run in a sentence. Not for estimating: physics has done that. */
#pragma once

#include "cli/conditions.h"
#include "cli/results.h"
#include "physics/droplet_set.h"

/* Fills results->droplets and results->steps: one row per spell. `set` is in the order of `trails`. */
bool rf_assess_droplets(RfResults *results, const RfTrail *trails, const RfDropletSet *set,
                        const RfChargeInputs *inputs, GError **error);

/* Fills results->budget for a typical accepted spell: the one whose charge has the median relative uncertainty. */
bool rf_assess_budget(RfResults *results, const RfTrail *trails, const RfDropletSet *set, const RfChargeInputs *inputs,
                      GError **error);

/* Fills results->unit from the accepted rows and the budget's common part. */
void rf_assess_unit(RfResults *results);

/* Fills results->measured and results->verdict. */
void rf_assess_run(RfResults *results);
