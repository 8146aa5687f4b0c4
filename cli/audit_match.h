/* Which act of which droplet a person timed, as far as noted clock, label, motion and time can tell. Every entry is put to every
 * explanation in turn: a sound timing of the label's droplet, another droplet's, a line too many or too few, a slip of the
 * pen, a field switch inside, a plain disagreement, nothing in the recording. Each has a likelihood under the person's
 * habit (bias and spread of the interval, offset and spread of the clock), and the habit is found from all entries by
 * expectation and maximisation over the same explanations, so that mistakes don't widen it.
 * Not for the verdict: audit_findings.h. */
#pragma once

#include <glib.h>
#include <stdbool.h>

#include "calib/units.h"
#include "cli/hand_timings.h"
#include "cli/line_crossings.h"

typedef enum {
    RF_FINDING_AGREES,
    RF_FINDING_DISAGREES,
    RF_FINDING_OTHER_DROPLET,
    RF_FINDING_LINE_MISCOUNT,
    RF_FINDING_DIGIT_SLIP,
    RF_FINDING_SWITCHED_INSIDE,
    RF_FINDING_UNMATCHED,
    RF_FINDINGS,
} RfFinding;

/* "agrees", "other droplet" ... as audit.csv has it. (static) */
const char *rf_finding_to_string(RfFinding finding);

typedef struct {
    RfValue bias_s, spread_s; /* of an interval: by hand less recording */
    bool has_clock;
    RfValue clock_offset_s; /* the person's clock less the recording's */
    double clock_spread_s;  /* of the noted starts */
    double sound;           /* entries that tell, by weight */
} RfHandHabit;

typedef struct {
    RfFinding finding;
    const RfPassage *passage; /* (borrowed) NULL if unmatched */
    double tracked_s,
        u_tracked_s;  /* of the act; over all of a droplet's passages where no clock tells which */
    double read_s;    /* the time as it should have been written, else as written */
    double divisions; /* really passed */
    double weight;    /* likelihood times prior, any scale common to one entry */
    double start_z;   /* noted start against this one, in spreads; 0 without a clock */
} RfExplanation;

typedef struct RfAuditMatch RfAuditMatch;

/* Both are borrowed and must outlive the match. (returns new) */
RfAuditMatch *rf_audit_match_new(const RfHandTimings *timings, const RfLineCrossings *crossings);
void rf_audit_match_free(RfAuditMatch *match);
G_DEFINE_AUTOPTR_CLEANUP_FUNC(RfAuditMatch, rf_audit_match_free)

const RfHandHabit *rf_audit_match_habit(const RfAuditMatch *match);

/* All explanations of entry `index` (no problem with it) into `out`, RfExplanation, emptied first. The last one is always
 * "unmatched". */
void rf_audit_match_explain(const RfAuditMatch *match, guint index, GArray *out);

/* The droplet that the entry's label follows at that time; 0: none does, or labels don't follow droplets. */
unsigned rf_audit_match_owner(const RfAuditMatch *match, guint index);
/* A sound entry's |difference - bias| over its uncertainty exceeds this once in two hundred: Student's t, because the spread
 * is known from so many entries only. (The other half of a hundredth is left to matching.) */
double rf_audit_match_level(const RfHandHabit *habit);
/* That |difference - bias| over its uncertainty, for the time as it should have been written. */
double rf_audit_match_spreads(const RfHandHabit *habit, const RfExplanation *one);
/* Under the level, and the noted start fits. */
bool rf_audit_match_is_within(const RfHandHabit *habit, const RfExplanation *one);

/* How long the recording shows droplets. */
double rf_audit_match_end_s(const RfAuditMatch *match);
/* The number of divisions that the entry claims. */
double rf_audit_match_divisions(const RfAuditMatch *match, guint index);
