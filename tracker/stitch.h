/* The second look: chains are joined over gaps, the whole recording at once, by what stays the same in a droplet. Each
 * end is carried over the gap by what its chain knows of past or future; one global assignment chooses the joins; a join
 * whose alternative is nearly as likely is left undone and both ends are marked as cut.
 * Not for spots that belong to no chain. */
#pragma once

#include "tracker/chain.h"

/* Joins chains in place (joined ones are freed). Returns the number of joins left undone because they couldn't be decided. */
unsigned rf_stitch_chains(const RfLinkScene *scene, GPtrArray *chains);
