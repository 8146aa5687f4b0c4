/* From chains of spots to paths that can be handed out: smoothed, bridged, judged. Not for linking. */
#pragma once

#include "tracker/chain.h"
#include "tracker/path.h"

/* (returns new) One path for every chain that bears enough evidence of a droplet; the others are counted. */
RfPaths *rf_path_build(RfLinkScene *scene, GPtrArray *chains);
