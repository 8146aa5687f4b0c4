/* The passages that a record of timings can be about, one set per motion and number of divisions, ready for look-up by time.
 * Not for matching. */
#pragma once

#include "cli/hand_timings.h"
#include "cli/line_crossings.h"

typedef struct { /* one droplet's passages without a switch inside, taken together */
    unsigned course;
    RfValue time_s;           /* mean; sigma: scatter of one passage about it */
    const RfPassage *nearest; /* (borrowed) the one nearest to the mean */
} RfTypicalPassage;

typedef struct {
    GArray *passages;  /* RfPassage, by start */
    GArray *typical;   /* RfTypicalPassage, one per droplet and field state at the start, by course */
    double per_course; /* mean number of passages of a droplet that has any; at least 1 */
} RfPassageSet;

typedef struct RfPassageSets RfPassageSets;

/* Sets for what the entries claim, and for one division more or less. (returns new) */
RfPassageSets *rf_passage_sets_new(const RfHandTimings *timings, const RfLineCrossings *crossings);
void rf_passage_sets_free(RfPassageSets *sets);
G_DEFINE_AUTOPTR_CLEANUP_FUNC(RfPassageSets, rf_passage_sets_free)

/* (borrowed) NULL if there is none, or `divisions` isn't above 0. */
const RfPassageSet *rf_passage_sets_find(const RfPassageSets *sets, double divisions, bool is_rise);
/* What the entry claims: its divisions, or its distance over the reticle's spacing, whole where it is whole within 2 %. */
double rf_passage_sets_divisions(const RfPassageSets *sets, const RfHandEntry *entry);

/* Index of the first passage that starts at `start_s` or later. */
guint rf_passage_set_from(const RfPassageSet *set, double start_s);
