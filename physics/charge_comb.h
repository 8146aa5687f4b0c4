/* How well a trial unit explains a set of charges, integers marginalised: the likelihood under charge_unit.h, which says
 * what it means. Not for deciding anything. */
#pragma once

#include <stddef.h>

#include "calib/units.h"

typedef struct {
    double coulomb, sigma_coulomb; /* sigma > 0 */
    double neutral_probability;    /* that it is no charge at all and knows nothing of the unit */
} RfCombCharge;

/* Probability of a droplet that fits no multiple because it is wrong (two droplets taken for one, a missed step). */
#define RF_CHARGE_COMB_OUTLIER_PROBABILITY 0.02

/* Takes charges with sigmas; joins relative_floor of each charge to its sigma, and tells neutrals from the rest
 * (prior 0.1, against charges spread evenly over +/- the largest). */
void rf_charge_comb_prepare(const RfValue *charges_coulomb, size_t n, double relative_floor,
                            RfCombCharge *prepared);

/* r(e) of one charge, outlier included: 0.02 <= r, and 1 where sigma hides the comb. */
double rf_charge_comb_ratio(const RfCombCharge *charge, double unit_coulomb);

/* Sum of ln r(e). Pure; safe from any thread. */
double rf_charge_comb_log_likelihood(const RfCombCharge *charges, size_t n, double unit_coulomb);
