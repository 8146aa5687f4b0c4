/* How long the localisation error of a recording lives, from all droplets together. Encoders hand errors on from frame
 * to frame; taken as white, such errors pass for diffusion (7 % in D at a correlation of 0.5 between neighbours). They
 * also mix a frame with its neighbours, which hides diffusion (11 % in D seen in interlaced MPEG-2 footage). The spread
 * alone can't tell either from diffusion; the fall can, since it says how much diffusion there is. So kind, size and
 * memory are common to all droplets, and each droplet's radius stays tied to both.
 * Not for droplets' own noise, which stays free in each fit. */
#pragma once

#include "physics/droplet_fit.h"
#include "physics/for_each.h"

/* model: as used for the fits, its steps and memories are ignored; fits: one per trail.
 *   how           droplets side by side; NULL: one after another. The outcome is the same
 *   fall, across  white where memory doesn't improve the likelihood beyond chance (p < 0.001) */
void rf_noise_memory_estimate(const RfTrail *trails, const RfDropletFit *fits, size_t n,
                              const RfDropletModel *model, const RfSideBySide *how, RfNoiseMemory *fall,
                              RfNoiseMemory *across);
