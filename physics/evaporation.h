/* Slow shrinkage of droplets by the d-squared law (I. Langmuir, Phys. Rev. 12 (1918) 368): a^2 falls by the same amount
 * every second, whatever the size. The fit of a droplet takes its radius as constant; the trend that remains in its speed is
 * put down to K = -d(a^2)/dt, common to all. Where K is plain, paths are put right before they are fitted
 * (droplet_set.c): what a droplet that kept the radius of the middle of its time would have done. Not for
 * air that begins to rise or sink: since v_g goes as a^2, shrinking droplets slow down alike, and only their speed under
 * a field tells the two apart. Diffusion is left as that of the middle radius, good to 1 % where a^2 falls by a third. */
#pragma once

#include "physics/droplet_fit.h"

/* K of one droplet, m^2/s, with its sigma; droplets whose charge changed, or that weren't fitted, can't be used.
 * First order in the trend: speed v_g(a) + w(a) V with w as 1/k(a).
 *   model  medium, timeline and memory; a common drift would take the shrinkage for its own and is left out */
bool rf_evaporation_of(const RfTrail *trail, const RfDropletModel *model, const RfDropletFit *fit,
                       RfValue *k_m2_s);

typedef struct {
    RfValue k_m2_s; /* mean over droplets by their weights */
    double p; /* chance of as much from none: likelihood ratio, chi-squared with one degree of freedom */
    double air_log_odds; /* log-likelihood of air whose common speed changes steadily, less that of K */
    double alike_p; /* chance of droplets that differ so much in K, each within its sigma and a tenth of K */
    unsigned droplets;
} RfEvaporation;

/* droplets 0: none could be used, p is 1. fits: one per trail. */
RfEvaporation rf_evaporation_pool(const RfTrail *trails, const RfDropletFit *const *fits, size_t n,
                                  const RfDropletModel *model);

/* Shrinking beyond chance (p < 0.001), alike, and likelier than moving air. */
bool rf_evaporation_is_plain(const RfEvaporation *evaporation);

/* The path less what shrinking changed in it. (returns new) n samples, to be freed with g_free; as they are where there
 * is no fit. */
RfSample *rf_evaporation_undo(const RfTrail *trail, const RfDropletModel *model, const RfDropletFit *fit,
                              double k_m2_s);
