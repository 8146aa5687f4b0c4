/* Where the reticle's lines and numerals lie in the background, and how much light they let through: a droplet behind
 * them is dimmed just as the background is. Not for measuring the reticle's spacing. */
#pragma once

#include "tracker/background.h"

/* Fills transmission and RF_PIXEL_LINE from level, noise and black level. */
void rf_reticle_shade_find(RfBackground *background);
