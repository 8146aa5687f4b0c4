/* Droplets by where they were: numbers change when a run is repeated with other settings, places don't. */
#pragma once

#include <glib.h>

#include "cli/results.h"

typedef struct { /* the place that names a droplet best, and how long it was in view */
    RfReviewPlace place;
    double start_s, end_s;
} RfReviewSighting;

/* The droplet that was there: it has a row within 0.1 s and 3 pixels, and no other has one as near in time. 0: none, or
 * two that can't be told apart; *why then says which in words. Rows (RfPathRow) may be in any order.
 *   why   (returns new), NULL if found */
unsigned rf_review_place_find(const GArray *paths, const RfReviewPlace *place, char **why);

/* One per droplet, in the order of the rows, which is by droplet: where it was seen farthest from all others. RfReviewSighting.
 * (returns new) */
GArray *rf_review_place_sightings(const GArray *paths);
