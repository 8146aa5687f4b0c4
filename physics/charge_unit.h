/* The elementary unit of charge found from charges alone: no known e, no rounding to integers. Not for naming a
 * droplet's integer (whole_multiples.h).
 *
 * Likelihood ratio of a unit e against a smooth distribution of charges, per droplet with charge q and sigma s:
 *   r(e) = sum over whole n of e N(q; n e, s)
 * which is a comb under the droplet's own sigma: integers marginalised, and with the same smooth prior density of
 * charge for every e. Its factor e makes half the unit, a third, ... half and a third as likely per droplet, so the
 * largest unit that the data support wins by its merits; as e -> 0, r -> 1. A neutral droplet knows nothing of the unit
 * and counts r = 1. One wrong charge mustn't rule: each droplet is with probability 0.02 an outlier with r = 1.
 *
 * Resolved means all of this, else `reason` says which failed:
 *   - at least 5 charged droplets, on at least 3 different multiples;
 *   - Bayes factor (mean of the product of r over ln e in the range) at least 100. For charges without a common unit
 *     its expectation is 1, so by Markov's inequality this happens to fewer than 1 set in 100; with the conditions below,
 *     2 in 15000 made-up sets;
 *   - chance at most 0.01: share of sets drawn from a smooth distribution (these charges, blurred beyond any comb, with
 *     these sigmas; fixed seed) that have as good a best unit;
 *   - at most 0.01 of the posterior on other units, finer ones included;
 *   - divisor_chance at most 0.05. */
#pragma once

#include <glib.h>
#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

#include "calib/units.h"

typedef struct {
    /* Range of ln e to search; low > 0. high <= low: up to the largest charge. Units that could not show in these
     * sigmas are skipped below (r = 1 there). */
    double low_coulomb, high_coulomb;
    /* Errors that differ from droplet to droplet but are common inputs by nature (slip law against radius, mostly): this
     * share of each charge joins its sigma in quadrature. It forbids a comb of highly charged droplets that no slip law
     * is good enough for. */
    double relative_floor;
    double
        relative_common; /* of every charge alike (scale, gap, voltage, viscosity): into the unit's sigma only */
    unsigned trials;     /* of the test against charges without a common unit; 0: not tested, chance -1 */
    uint64_t seed;
    bool wants_curve;
} RfChargeUnitOptions;

/* 2e-20 C up to the largest charge, floor 0.002, common 0, 199 trials, a fixed seed, no curve. */
extern const RfChargeUnitOptions RF_CHARGE_UNIT_DEFAULTS;

typedef struct {
    bool is_resolved;
    RfValue
        unit_coulomb; /* the best unit, also when not resolved (0 if there is none); sigma with the common part */
    double u_random_coulomb; /* the part from the droplets' own sigmas */
    double log_bayes_factor; /* ln, against no common unit, over the range searched */
    double chance;           /* that charges without a common unit look as good, 1/(trials+1) at least */
    double other_units_probability; /* posterior outside the best unit */
    double
        divisor_chance; /* that all true multiples share a divisor, so that the true unit is a half, third, ... */
    unsigned charged, levels, outliers; /* droplets used; different |n|; those that fit no multiple */
    double low_coulomb, high_coulomb;   /* searched */
    char *reason;                       /* what supports it, or why not; a sentence without full stop */
    GArray *curve_unit_coulomb;         /* double, ascending; NULL unless wanted */
    GArray *curve_log_likelihood;       /* double, relative to the best */
} RfChargeUnit;

/* charges with their own (random) sigmas, any signs, one per droplet and spell. Never NULL: too few charges is a result.
 * Charges with a sigma that isn't positive or that aren't finite are a programmer's mistake. (returns new) */
RfChargeUnit *rf_charge_unit_find(const RfValue *charges_coulomb, size_t n,
                                  const RfChargeUnitOptions *options);
void rf_charge_unit_free(RfChargeUnit *unit);
G_DEFINE_AUTOPTR_CLEANUP_FUNC(RfChargeUnit, rf_charge_unit_free)
