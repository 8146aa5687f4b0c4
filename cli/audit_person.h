/* What a person's timing habit is and what it costs: bias and spread, start and stop apart where clocks are tied, trend, limits
 * of agreement, the effect on velocity and charge, and each droplet's charge from hand timings alone, raw and corrected.
 * From the entries found sound only. */
#pragma once

#include "cli/audit_match.h"
#include "cli/results.h"
#include "physics/medium.h"

/* Reads results->audit, fills results->person and ->hand_charges. `medium` may be NULL: no charges then. */
void rf_audit_person_describe(RfResults *results, const RfHandTimings *timings, const RfAuditMatch *match,
                              const RfMedium *medium);
