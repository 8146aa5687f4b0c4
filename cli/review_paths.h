/* The cuts and joins of a review, done to paths before anything is measured from them. Other droplets keep their
 * numbers: the later part of a cut gets the next free one, joined paths keep that of the earlier. */
#pragma once

#include <glib.h>

#include "cli/results.h"

/* The paths as reviewed, by droplet, then time; the same array where nothing was cut or joined. Entries are taken in the
 * order of the file, each on what the ones before it left; the outcome stands in the entry. Fills `found` of every
 * entry, cut and join or not. (returns new reference)
 *   paths    RfPathRow
 *   review   RfReviewRow */
GArray *rf_review_paths_apply(GArray *paths, GArray *review);
