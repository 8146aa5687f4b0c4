/* What the voltage log says, laid over what the motion says: names and voltages from the log, instants from the motion,
 * and a list of where the two disagree. */
#pragma once

#include "physics/field_runs.h"
#include "physics/field_states.h"
#include "physics/log_clock.h"

/* States and voltages that the sheet leaves open, from the log: states in their order of occurrence, median voltages.
 * Voltages of the log replace those of the sheet. */
void rf_field_log_complete_sheet(const GArray *spans, RfFieldSheet *sheet);

/* Matches the clocks, renames intervals, sets voltages, adds switches that nobody could see, lists findings.
 * Returns false with error where the log's switches can't be matched with those in the motion. */
bool rf_field_log_apply(const GArray *spans, const RfFieldSheet *sheet, const RfFieldRuns *runs,
                        const RfStateDroplet *droplets, RfFieldTimeline *timeline, GError **error);

/* Clock, late switches and voltages that don't fit, from refined switches and fitted droplets. */
void rf_field_log_audit(RfFieldTimeline *timeline, const RfSwitchWitness *witnesses, size_t n);
