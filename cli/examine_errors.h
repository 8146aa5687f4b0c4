/* What is wrong with the positions of the droplets in a recording: scatter, memory, standing still, lagging behind.
 * From the paths alone; for examine.c. */
#pragma once

#include "cli/fitness.h"
#include "cli/watch.h"
#include "tracker/path.h"

/* Fills the part "errors of position" but for combing. */
void rf_examine_errors(const RfWatch *watch, const RfPaths *paths, RfFitnessFigures *figures);
