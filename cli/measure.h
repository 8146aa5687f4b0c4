/* From paths in millimetres to everything that is reported of them: segments, switches, steps, droplets with charge and
 * verdict, the unit, the budget. Not for pictures: the rows may come from a recording or from a paths.csv. */
#pragma once

#include <glib.h>
#include <stdbool.h>

#include "cli/conditions.h"
#include "cli/results.h"
#include "cli/settings.h"
#include "physics/droplet_set.h"

/* The supply as the sheet states it, with the log if there is one. Its log borrows from the array. */
typedef struct {
    RfFieldSheet sheet;
    GArray *log; /* RfLogSpan; NULL without a log */
} RfSupply;

RfSupply *rf_measure_supply_new(const RfSettings *settings, GError **error);
void rf_measure_supply_free(RfSupply *supply);
G_DEFINE_AUTOPTR_CLEANUP_FUNC(RfSupply, rf_measure_supply_free)

/* Reads results->paths and fills segments, switches, steps, droplets, unit, budget, warnings, measured and verdict. Cuts
 * paths that passed from one droplet to another and says so in results->cuts, unless results->without says that a person
 * has settled them; verdicts in results->review are honoured.
 * `threads` 0: one per core. */
bool rf_measure_paths(RfResults *results, const RfChargeInputs *inputs, const RfSupply *supply, int threads,
                      GError **error);
