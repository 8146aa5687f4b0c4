#include "physics/charge_comb.h"

#include <gsl/gsl_math.h>
#include <math.h>

static const double NEUTRAL_PRIOR = 0.1;

void rf_charge_comb_prepare(const RfValue *charges_coulomb, size_t n, double relative_floor,
                            RfCombCharge *prepared)
{
    double largest = 0.0;
    for (size_t i = 0; i < n; i++)
        largest = fmax(largest, fabs(charges_coulomb[i].value) + charges_coulomb[i].sigma);
    for (size_t i = 0; i < n; i++) {
        const double q = charges_coulomb[i].value;
        const double sigma = hypot(charges_coulomb[i].sigma, relative_floor * q);
        const double at_zero = exp(-0.5 * q * q / (sigma * sigma)) / (sigma * sqrt(2.0 * M_PI));
        const double neutral = NEUTRAL_PRIOR * at_zero * 2.0 * largest;
        prepared[i] = (RfCombCharge){q, sigma, neutral / (neutral + 1.0 - NEUTRAL_PRIOR)};
    }
}

/* Sum over all n of N(x; n, t), the unit being 1: two nearest teeth where they are narrow, else the Fourier series of
 * the comb; both are exact to 1e-5 at the seam. */
static double comb(double x, double t)
{
    const double off = fabs(x - nearbyint(x));
    if (t < 0.2) {
        const double near = exp(-0.5 * off * off / (t * t));
        const double next = exp(-0.5 * (1.0 - off) * (1.0 - off) / (t * t));
        return (near + next) / (t * sqrt(2.0 * M_PI));
    }
    const double p = exp(-2.0 * M_PI * M_PI * t * t);
    const double c = cos(2.0 * M_PI * off);
    const double c2 = 2.0 * c * c - 1.0, c3 = c * (2.0 * c2 - 1.0), c4 = 2.0 * c2 * c2 - 1.0;
    const double p4 = p * p * p * p;
    return 1.0 + 2.0 * (p * c + p4 * c2 + p4 * p4 * p * c3 + p4 * p4 * p4 * p4 * c4);
}

double rf_charge_comb_ratio(const RfCombCharge *charge, double unit_coulomb)
{
    const double t = charge->sigma_coulomb / unit_coulomb;
    double ratio = 1.0;
    if (t < 1.0) { /* beyond, the comb's ripple is below 1e-8 */
        const double x = charge->coulomb / unit_coulomb;
        const double zero_tooth = exp(-0.5 * x * x / (t * t)) / (t * sqrt(2.0 * M_PI));
        const double charged = fmax(comb(x, t) - zero_tooth, 0.0);
        ratio = charge->neutral_probability + (1.0 - charge->neutral_probability) * charged;
    }
    return RF_CHARGE_COMB_OUTLIER_PROBABILITY + (1.0 - RF_CHARGE_COMB_OUTLIER_PROBABILITY) * ratio;
}

double rf_charge_comb_log_likelihood(const RfCombCharge *charges, size_t n, double unit_coulomb)
{
    double sum = 0.0;
    for (size_t i = 0; i < n; i++) sum += log(rf_charge_comb_ratio(&charges[i], unit_coulomb));
    return sum;
}
