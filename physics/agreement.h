/* Do two measurements of the same thing agree? E_n for one pair, limits of agreement for many.
 * Not for deciding what a disagreement means. */
#pragma once

#include <glib.h>
#include <stdbool.h>
#include <stddef.h>

#include "calib/units.h"

/* E_n = (x - X)/sqrt(U_x^2 + U_X^2) with U = 2 sigma, the expanded uncertainties (ISO 13528:2015, 9.7);
 * |E_n| <= 1: satisfactory. Both sigmas zero: 0 if equal, else +/-infinity is avoided by +/-G_MAXDOUBLE. */
double rf_agreement_en_number(RfValue measured, RfValue reference);

/* Limits of agreement of paired differences (J. M. Bland and D. G. Altman, Lancet 327 (1986) 307): mean difference and
 * mean -/+ coverage times their standard deviation, each with a confidence interval of Student's t. */
typedef struct {
    double low, high;
} RfInterval;

typedef struct {
    size_t n;
    double bias, standard_deviation; /* of the differences; unit of the input */
    double u_bias, u_limit;          /* s/sqrt(n), sqrt(3 s^2/n) */
    double lower, upper;             /* limits of agreement */
    RfInterval bias_interval, lower_interval, upper_interval;
} RfAgreement;

/* coverage: 1.96 in later usage, 2 in the 1986 paper. confidence in (0, 1), e.g. 0.95. Needs n >= 2. */
bool rf_agreement_limits(const double *differences, size_t n, double coverage, double confidence,
                         RfAgreement *agreement, GError **error);
