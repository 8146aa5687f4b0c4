/* A result folder that an earlier run wrote, back into results, as far as an audit of hand timings needs it: paths, scale, switches,
 * droplets, and the conditions out of summary.json. Not for writing it again: what isn't needed isn't read. */
#pragma once

#include <glib.h>
#include <stdbool.h>

#include "cli/results.h"
#include "physics/medium.h"

/* paths.csv, scale.json and switches.csv must be there; the others may be missing, with a warning in the results.
 *   has_medium   false where summary.json doesn't hold the sheet's settings: *medium is untouched then (returns new) */
RfResults *rf_read_results(const char *folder, RfMedium *medium, bool *has_medium, GError **error);
