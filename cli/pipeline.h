/* The whole road from a run sheet to results, and the parts of it that commands take alone: the only file that joins
 * all rooms. It reads like a plot; each step's own file holds the work. */
#pragma once

#include <glib.h>

#include "cli/results.h"
#include "cli/settings.h"
#include "cli/watch.h"

/* The sheet's recording to everything. (returns new) */
RfResults *rf_pipeline_run(const RfSettings *settings, const RfWatchHooks *hooks, GError **error);

/* As far as paths and scale. (returns new) */
RfResults *rf_pipeline_paths(const RfSettings *settings, const RfWatchHooks *hooks, GError **error);

/* From a paths.csv that an earlier run wrote. (returns new) */
RfResults *rf_pipeline_charge(const RfSettings *settings, const char *paths_csv, const RfWatchHooks *hooks,
                              GError **error);
