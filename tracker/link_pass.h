/* The ordered pass: exposure by exposure, spots are given to the droplets that expect them, as long as it is plain whose
 * they are. Where two droplets come too near to be told apart, both chains end, what is seen there is left to nobody, and
 * new chains begin where the spots part again: joining them takes the future, which this pass doesn't know.
 * Not for closing gaps longer than a blink. */
#pragma once

#include "tracker/chain.h"

/* (returns new) RfChain pointers in order of their first exposure; spots in a chain are claimed in the scene. */
GPtrArray *rf_link_pass_run(RfLinkScene *scene);
