/* Spots that the linking left over, given to the chains that now know where they were: inside gaps, and beyond both ends
 * for as long as what is found there is likelier the droplet than chance. Spots whose owner is doubtful stay nobody's.
 * Not for joining chains. */
#pragma once

#include "tracker/chain.h"

/* Adds hits to chains in place and claims their spots. */
void rf_fill_gaps(RfLinkScene *scene, GPtrArray *chains);
void rf_fill_ends(RfLinkScene *scene, GPtrArray *chains);

/* Takes back spots that two droplets may have made together: a chain not seen where another one's spot is all there is. */
void rf_fill_release_shared(RfLinkScene *scene, GPtrArray *chains);

/* Mean number of unclaimed spots per square pixel and exposure; never 0. */
double rf_fill_unclaimed_px2(const RfLinkScene *scene);
