/* Looks a recording over without a run sheet: the file, its light, its camera, the droplets in it and how well they can
 * be located. Not for judging what it found: fitness.h does that. */
#pragma once

#include <stdbool.h>

#include "cli/fitness.h"
#include "cli/watch.h"

/* At most RF_EXAMINE_FRAMES from the middle of the recording are looked at, all of it with `is_whole`; timestamps are
 * those of the whole file either way. No droplet in it is a result, not an error. */
enum { RF_EXAMINE_FRAMES = 1800 };
bool rf_examine_recording(const char *path, bool is_whole, const RfWatchHooks *hooks,
                          RfFitnessFigures *figures, GError **error);
