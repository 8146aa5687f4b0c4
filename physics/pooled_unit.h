/* The unit of charge from the droplets of many recordings, errors that recordings share kept common to the last line. Not
 * for names and files: cli/pool.h knows which measurement is whose.
 *
 * Model: charge = n e (1 + sum over inputs of influence * z) + random, with one z ~ N(0, 1) per *measurement*: recordings
 * that name the same measurement of an input have the same z. Done in two steps:
 *  1. Is there a unit, and which? All charges together in the comb of charge_unit.h, each with what its recording
 *     doesn't share with all others joined to its sigma.
 *  2. Each recording's own unit near that one, integers summed over, from the comb of its charges alone; then the mean of
 *     these under their whole covariance (common_mean.h). The covariance is exact to first order for that mean: an
 *     input moves a recording's unit by its influences weighted as the charges are.
 * A recording whose charges settle its own unit stands alone: nothing that others say enters. One whose integers are
 * open (few droplets, highly charged) is read with what all others let expect of it as a prior, which is divided out
 * again (expectation propagation, T. P. Minka, 2001), so that nothing is counted twice; such a one can't be found off by
 * more than a tooth of its comb. One that tells nothing is left out. */
#pragma once

#include <glib.h>
#include <stdbool.h>
#include <stddef.h>

#include "calib/units.h"
#include "physics/charge_unit.h"

typedef struct {
    size_t n;                       /* accepted charges; 0: a recording that has none */
    const RfValue *charges_coulomb; /* sigma random, > 0 */
    size_t n_inputs;
    const size_t *measurements; /* n_inputs: which measurement each input is, 0 .. n_measurements - 1 */
    const double
        *influences_coulomb; /* n x n_inputs, row by row: what one sigma of each input does to each charge */
} RfPooledRecording;

typedef enum {
    RF_POOLED_NONE,     /* tells nothing of the unit */
    RF_POOLED_TOGETHER, /* its integers are settled with what the others say */
    RF_POOLED_ALONE,    /* its own charges settle its unit */
} RfPooledBasis;

const char *rf_pooled_basis_to_string(RfPooledBasis basis); /* none, together, alone */

typedef struct {
    RfPooledBasis basis;  /* RF_POOLED_NONE: the rest is 0, and 1 for p */
    RfValue unit_coulomb; /* this recording's own; sigma with its common part */
    double u_random_coulomb;
    double weight;           /* in the pooled unit */
    RfValue offset;          /* relative: its unit less what the others let expect */
    double deviate, p;       /* offset over its sigma; for one look */
    RfValue without_coulomb; /* the pooled unit without it; {0, 0} if it is the only one */
} RfPooledPart;

typedef struct {
    bool is_resolved;        /* false: search->reason says why, and only search is filled */
    RfChargeUnit *search;    /* step 1; its unit is the first guess only */
    RfValue unit_coulomb;    /* pooled; sigma with everything */
    double u_random_coulomb; /* the droplets' part of it */
    unsigned used;           /* recordings that tell something */
    double chi_squared, p;   /* do they agree? used - 1 degrees of freedom */
    size_t most_off;         /* recording with the largest deviate; its p for `used` looks */
    double most_off_p;
    size_t n;
    RfPooledPart *parts; /* one per recording */
    size_t n_measurements;
    double *measurement_relative; /* what one sigma of each does to the pooled unit, relative, signed */
} RfPooledUnit;

/* `trials`: of the test against charges without a unit (charge_unit.h); 99 is the least that can pass. Fails only where
 * the covariance can't be inverted. (returns new) */
RfPooledUnit *rf_pooled_unit_new(const RfPooledRecording *recordings, size_t n, size_t n_measurements,
                                 unsigned trials, GError **error);
void rf_pooled_unit_free(RfPooledUnit *unit);
G_DEFINE_AUTOPTR_CLEANUP_FUNC(RfPooledUnit, rf_pooled_unit_free)
