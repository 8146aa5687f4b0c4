#include "physics/whole_multiples.h"

#include <gsl/gsl_math.h>
#include <math.h>

#include "physics/constants.h"

/* Sum over all integers m of exp(-((m - x)^2 - x^2)/(2 s^2)), |x| <= 1/2: the evidence relative to the nearest. */
static double relative_evidence(double x, double s)
{
    /* A wide Gaussian sampled at the integers sums to its integral: the next Fourier term is exp(-2 pi^2 s^2). */
    if (s > 3.0) return s * sqrt(2.0 * M_PI) * exp(0.5 * x * x / (s * s));
    double sum = 0.0;
    for (int m = -30; m <= 30; m++) sum += exp(-0.5 * ((m - x) * (m - x) - x * x) / (s * s));
    return sum;
}

RfWholeMultiple rf_whole_multiples_nearest(RfValue charge_coulomb)
{
    const double limit = 1e9;
    const double units =
        GSL_MAX_DBL(-limit, GSL_MIN_DBL(limit, charge_coulomb.value / RF_ELEMENTARY_CHARGE_COULOMB));
    const double sigma = charge_coulomb.sigma / RF_ELEMENTARY_CHARGE_COULOMB;
    const double n = nearbyint(units), x = units - n;
    if (sigma <= 0.0) return (RfWholeMultiple){(int)n, 1.0, x == 0.0 ? 0.0 : copysign(limit, x)};
    return (RfWholeMultiple){(int)n, 1.0 / relative_evidence(x, sigma), x / sigma};
}
