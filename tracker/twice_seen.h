/* One droplet seen twice in the same exposure: compression leaves a droplet's picture of a moment ago beside its new one,
 * and a broad or fast droplet may come apart into two spots. The ordered pass gives each spot a chain, the old one ends,
 * the new one goes on. What both saw of the droplet is given back, so that the second look can join them.
 * Not for two droplets that were seen side by side for a while. */
#pragma once

#include "tracker/chain.h"

/* Takes the shared exposures from both chains of every such pair and releases their spots; three hits are left to each at
 * least, or the pair stays as it is.
 *   chains  of RfChain, in order of their first exposure */
void rf_twice_seen_release(RfLinkScene *scene, const GPtrArray *chains);
