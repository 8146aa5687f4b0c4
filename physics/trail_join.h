/* Fragments of one droplet's path laid end to end, for finding switches: a tracker that loses droplets where they turn
 * back would otherwise leave no trail that shows the turn. Only for that: a wrong join costs nothing there, since one
 * droplet can't vote a switch into being, but would spoil a charge. */
#pragma once

#include <glib.h>

#include "physics/trail.h"

typedef struct {
    size_t n;
    RfTrail *trails; /* n; samples owned */
} RfJoinedTrails;

/* Joins an end to a start at most 0.2 s later where each is the other's nearest and within reach of a droplet. */
RfJoinedTrails *rf_trail_join(const RfTrail *trails, size_t n);
void rf_trail_join_free(RfJoinedTrails *joined);
G_DEFINE_AUTOPTR_CLEANUP_FUNC(RfJoinedTrails, rf_trail_join_free)
