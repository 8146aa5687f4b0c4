/* Rows of paths.csv as the trails that physics reads: one per droplet, measured positions only. Not for pixels: the
 * rows' millimetres are taken as they are. */
#pragma once

#include <glib.h>

#include "physics/trail.h"

typedef struct {
    RfTrail *trails; /* n; they borrow from samples */
    size_t n;
    RfSample *samples;
} RfTrailSet;

/* `rows`: RfPathRow, sorted by droplet, then time. (returns new) */
RfTrailSet *rf_trails_new(const GArray *rows);
void rf_trails_free(RfTrailSet *trails);
G_DEFINE_AUTOPTR_CLEANUP_FUNC(RfTrailSet, rf_trails_free)

/* A droplet's rows from an instant on become those of droplet `as`, a number larger than all others, behind them. */
void rf_trails_cut(GArray *rows, unsigned droplet, double time_s, unsigned as);
