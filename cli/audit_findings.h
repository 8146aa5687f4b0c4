/* From an entry's explanations to its finding: the likeliest one, held to a verdict level under which a sound entry is called
 * unsound at most once in a hundred; with the evidence in words and the frames to look at. E_n is reported as the standard
 * defines it and decides nothing: with k = 2 it would flag one sound entry in twenty. */
#pragma once

#include "cli/audit_match.h"
#include "cli/results.h"

/* One row; label and evidence are new. `explanations` is room to work in (RfExplanation). */
RfAuditRow rf_audit_findings_row(const RfAuditMatch *match, const RfHandTimings *timings, guint index,
                                 GArray *explanations);
