/* The best mean of values that share errors, and whether they agree. Generalised least squares (A. C. Aitken, Proc. R. Soc.
 * Edinburgh 55 (1935) 42): with covariance V = own^2 on the diagonal + what they share, mean = (1' V^-1 x)/(1' V^-1 1).
 * Knows nothing of charges: pooled_unit.h does.
 *
 * The covariance must be that at one common mean, not at each value of its own: shares in per cent times differing
 * values pull the mean below all of them (R. W. Peelle's puzzle, 1987; G. D'Agostini, Nucl. Instrum. Methods A 346
 * (1994) 306). Relative deviations from a common unit have it so. A weight may be negative: then a value serves to tell
 * what the others share.
 *
 * Is one off? Each value against what all others let expect, over the sigma of that difference (W. Baarda, A testing
 * procedure for use in geodetic networks, 1968): N(0, 1) where nothing is wrong. The largest of n such deviates is no
 * single look: its chance is that of n (Z. Sidak, J. Am. Stat. Assoc. 62 (1967) 626). */
#pragma once

#include <glib.h>
#include <stdbool.h>
#include <stddef.h>

#include "calib/units.h"

typedef struct {
    double weight;     /* in the mean; they add up to 1 */
    RfValue offset;    /* value less what the others let expect; {0, 0} for a single value */
    double deviate, p; /* offset over its sigma; two-sided, for one look */
    RfValue without;   /* mean of the others; {0, 0} for a single value */
} RfCommonMeanPart;

typedef struct {
    RfValue mean;
    double sigma_own, sigma_common; /* the parts of the mean's sigma, in quadrature */
    double chi_squared, p; /* of all values about the mean, n - 1 degrees of freedom; p = 1 for one value */
    size_t most_off;
    double most_off_p; /* of the largest deviate, for n looks */
    size_t n;
    RfCommonMeanPart *parts;
} RfCommonMean;

/* own_sigma > 0; common: n x n, row by row, positive semidefinite. n >= 1. Unit: that of the values, throughout. Fails
 * only where the covariance isn't positive definite. (returns new) */
RfCommonMean *rf_common_mean_new(const double *values, const double *own_sigma, const double *common,
                                 size_t n, GError **error);
void rf_common_mean_free(RfCommonMean *mean);
G_DEFINE_AUTOPTR_CLEANUP_FUNC(RfCommonMean, rf_common_mean_free)
