/* The verdicts of a review, once the program has reached its own: droplets set aside or restored by a person. What the
 * program found stays in the reason. */
#pragma once

#include "cli/results.h"

/* Changes results->droplets as results->review says, in the order of the file, and fills the outcome of those entries.
 * All spells of a droplet go together; a spell without a charge can't be restored. */
void rf_review_verdicts_apply(RfResults *results);

/* Warns of every entry that came to nothing. */
void rf_review_verdicts_warn(RfResults *results);
