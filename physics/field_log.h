/* What the voltage log says, laid over what the motion says: names and voltages from the log, instants from the motion,
 * and a list of where the two disagree. */
#pragma once

#include "physics/field_runs.h"
#include "physics/field_states.h"
#include "physics/log_clock.h"

/* The levels that the log knows, in place of the sheet's one per state: voltages closer than a tenth of the largest are
 * one level here, their mean; which of them an interval had is for the log to say. States that the sheet leaves open
 * come in their order in the log; of a state that the log doesn't have the sheet's level stays.
 *   levels   RF_FIELD_LEVELS, the first n those of the sheet
 *   returns  how many there are */
size_t rf_field_log_levels(const GArray *spans, RfFieldLevel *levels, size_t n);

/* Matches the clocks, renames intervals, sets voltages, adds switches that nobody could see, lists findings.
 * Returns false with error where the log's switches can't be matched with those in the motion. */
bool rf_field_log_apply(const GArray *spans, const RfFieldSheet *sheet, const RfFieldRuns *runs,
                        const RfStateDroplet *droplets, RfFieldTimeline *timeline, GError **error);

/* Clock, late switches and voltages that don't fit, from refined switches and fitted droplets. */
void rf_field_log_audit(RfFieldTimeline *timeline, const RfSwitchWitness *witnesses, size_t n);
