/* What the recording itself is like, for the report's header, its warnings and its table of health. Not for judging: fitness.h
 * does that, as for `check`. */
#pragma once

#include "cli/follow.h"
#include "cli/results.h"
#include "cli/watch.h"

/* `videos`: char *, the files that were watched. */
void rf_health_describe(RfResults *results, const GPtrArray *videos, const RfWatch *watch,
                        const RfFollow *follow);
