/* Invented, fixed results with every kind of row in them, for the tests of what is written out. Not physics: the
 * numbers only look like a run. */
#pragma once

#include "cli/results.h"

/* Seven droplets (one set aside, one with a charge step), four switches, a resolved unit, three audit entries, labels
 * that would do harm if a page ran them. (returns new) */
RfResults *sample_results_new(void);

/* The same, reviewed: droplet 2 set aside, droplet 4 cut, one that isn't found; reasons and names that would do harm. (returns new) */
RfResults *sample_results_reviewed_new(void);

/* A run in which nothing could be measured: no paths, no scale, no unit. (returns new) */
RfResults *sample_results_empty_new(void);
