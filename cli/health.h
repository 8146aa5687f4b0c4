/* What the recording itself is like, for the report's header and warnings. Not the verdict on its fitness: `check` gives
 * that with figures. */
#pragma once

#include "cli/follow.h"
#include "cli/results.h"
#include "cli/watch.h"

void rf_health_describe(RfResults *results, const RfWatch *watch, const RfFollow *follow);
