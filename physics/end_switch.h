/* A switch within the first or last moments of a recording, which leaves no run long enough to show a state: whether there
 * was one, and to which level, by the paths alone. Not for any other switch (field_states.h). */
#pragma once

#include "physics/field_runs.h"
#include "physics/field_states.h"

/* Gives up an interval too brief to have been labelled from at either end of the timeline, and puts in the level and
 * instant under which the paths are likelier by far than without a switch, if there is one.
 *   trails    those of the runs
 *   droplets  as the labels see them */
void rf_end_switch_settle(RfFieldTimeline *timeline, const RfTrail *trails, const RfFieldRuns *runs,
                          const RfStateDroplet *droplets, const RfFieldLevel *levels, size_t n_levels);
