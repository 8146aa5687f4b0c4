/* Looks a recording over, with or without a run sheet: the file, its light, its camera, the droplets in it and how well they can
 * be located. Not for judging what it found: fitness.h does that. */
#pragma once

#include <stdbool.h>

#include "cli/fitness.h"
#include "cli/watch.h"
#include "tracker/path.h"

/* At most RF_EXAMINE_FRAMES from the middle of the recording are looked at, all of it with `is_whole`; timestamps are
 * those of the whole file either way. No droplet in it is a result, not an error. */
enum { RF_EXAMINE_FRAMES = 1800 };
bool rf_examine_recording(const char *path, bool is_whole, const RfWatchHooks *hooks,
                          RfFitnessFigures *figures, GError **error);

/* The same of a recording that was watched and followed already: nothing is decoded again, so that the one matter that
 * needs the pictures, combing, stays untested. `videos`: char *, its files. */
void rf_examine_watched(const GPtrArray *videos, const RfWatch *watch, const RfPaths *paths,
                        RfFitnessFigures *figures);
