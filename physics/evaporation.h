/* Slow shrinkage of droplets by the d-squared law (I. Langmuir, Phys. Rev. 12 (1918) 368): a^2 falls by the same amount
 * every second, whatever the size. The fit of a droplet takes its radius as constant and so finds that of the middle of
 * the time it was watched; here the trend that remains in its speed is put down to K = -d(a^2)/dt. Not applied. Since v_g goes as a^2,
 * shrinking droplets slow down alike, as in air that begins to rise: only their speed under a field tells the two apart. */
#pragma once

#include "physics/droplet_set.h"

/* K of one droplet, m^2/s, with its sigma; droplets whose charge changed, or that weren't fitted, can't be used.
 * First order in the trend: speed v_g(a) + w(a) V with w as 1/k(a). */
bool rf_evaporation_of(const RfTrail *trail, const RfDropletSet *set, const RfMedium *medium,
                       const RfDropletFit *fit, RfValue *k_m2_s);

typedef struct {
    RfValue k_m2_s; /* mean over droplets by their weights */
    double p; /* chance of as much from none: likelihood ratio, chi-squared with one degree of freedom */
    unsigned droplets;
} RfEvaporation;

/* droplets 0: none could be used, p is 1. */
RfEvaporation rf_evaporation_pool(const RfTrail *trails, const RfDropletSet *set, const RfMedium *medium);
