/* A paths.csv that an earlier run wrote, back into rows. Not for anyone's table of positions: the columns are ours. */
#pragma once

#include <glib.h>
#include <stdbool.h>

#include "cli/results.h"

/* Fills results->paths, and results->scale from the scale.json beside it where there is one.
 *   scale_relative_u   of that scale; 0 without a scale.json, with a warning in the results */
bool rf_read_paths(const char *path, RfResults *results, double *scale_relative_u, GError **error);
