/* Invented, fixed results with every kind of row in them, for the tests of what is written out. Not physics: the
 * numbers only look like a run. */
#pragma once

#include "cli/results.h"

/* Seven droplets (one set aside, one with a charge step), four switches, a resolved unit, three audit entries, labels
 * that would do harm if a page ran them. (returns new) */
RfResults *sample_results_new(void);

/* A run in which nothing could be measured: no paths, no scale, no unit. (returns new) */
RfResults *sample_results_empty_new(void);
