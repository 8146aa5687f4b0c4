/* Which droplet a label follows, and how far the person's clock is off: both by what most entries say together, since single
 * entries may be wrong. A label may pass from one path to another where the first ends. Not for judging entries. */
#pragma once

#include <stdbool.h>

#include "cli/hand_timings.h"
#include "cli/line_crossings.h"
#include "cli/passage_sets.h"

typedef struct RfAuditLabels RfAuditLabels;

/* All are borrowed and must outlive the labels. (returns new) */
RfAuditLabels *rf_audit_labels_new(const RfHandTimings *timings, const RfLineCrossings *crossings,
                                   const RfPassageSets *sets);
void rf_audit_labels_free(RfAuditLabels *labels);
G_DEFINE_AUTOPTR_CLEANUP_FUNC(RfAuditLabels, rf_audit_labels_free)

/* What is known of the person when labels are given to droplets. */
typedef struct {
    bool has_clock;
    double clock_offset_s, clock_spread_s;
    double bias_s, spread_s;
} RfLabelHabit;

/* The offset (person's clock less the recording's) under which labels follow droplets best; none is taken where it does
 * nearly as well. False: no offset makes sense of the noted starts. */
bool rf_audit_labels_find_clock(const RfAuditLabels *labels, double *offset_s);

/* Gives every label its droplets. A label whose entries plainly belong to many droplets follows none. */
void rf_audit_labels_assign(RfAuditLabels *labels, const RfLabelHabit *habit);

/* Course that the label of entry `index` follows at `at_s` (recording's time; negative: unknown), or -1. */
int rf_audit_labels_owner(const RfAuditLabels *labels, guint index, double at_s);
