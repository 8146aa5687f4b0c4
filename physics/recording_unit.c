#include "physics/recording_unit.h"

#include <glib.h>
#include <math.h>

/* Within it no neighbouring fraction (6/7, 7/6) of the unit, which explains charges that all share a divisor as well. */
static const double HALF_WINDOW = 0.15;
static const double MOST_ELSEWHERE = 0.01, LARGEST_SIGMA = 0.03, LEAST_GAIN = 0.01;

enum { FEWEST_POINTS = 161, MOST_POINTS = 20001 };

/* Sigma of x if all multiples were known: how fine the comb's peaks can be. */
static double finest(const RfCombCharge *charges, size_t n, double nearby_coulomb)
{
    double information = 0.0;
    for (size_t i = 0; i < n; i++) {
        const double multiple = nearbyint(charges[i].coulomb / nearby_coulomb);
        const double relative = multiple * nearby_coulomb / charges[i].sigma_coulomb;
        information += relative * relative;
    }
    return information > 1.0 ? 1.0 / sqrt(information) : 1.0;
}

/* Posterior density at evenly spaced x, the highest being 1. */
typedef struct {
    int n;
    double low, step;
    double *density;
} Curve;

static double at(const Curve *curve, int i)
{
    return curve->low + curve->step * i;
}

/* Charges that stand on a tooth. The comb has a factor of the unit for each, which weighs one unit against another by how many
 * multiples it leaves open. Multiples once known, it only drags the unit up, by that number times x's variance, alike in all
 * recordings: it would be what remains in a mean of many. Here it is taken off. */
static double on_teeth(const RfCombCharge *charges, size_t n)
{
    double sum = 0.0;
    for (size_t i = 0; i < n; i++) sum += 1.0 - charges[i].neutral_probability;
    return sum;
}

/* Even prior where its sigma is 0. */
static Curve curve_new(const RfCombCharge *charges, size_t n, double nearby_coulomb, RfValue prior,
                       double centre, double reach)
{
    const double wanted = 2.0 * reach / (0.25 * finest(charges, n, nearby_coulomb));
    Curve curve = {.n = (int)CLAMP(wanted, FEWEST_POINTS, MOST_POINTS)};
    curve.low = centre - reach;
    curve.step = 2.0 * reach / (curve.n - 1);
    curve.density = g_new(double, curve.n);
    const double teeth = on_teeth(charges, n);
    double highest = -G_MAXDOUBLE;
    for (int i = 0; i < curve.n; i++) {
        const double x = at(&curve, i), off = prior.sigma > 0.0 ? (x - prior.value) / prior.sigma : 0.0;
        curve.density[i] = -G_MAXDOUBLE;
        if (x > -0.9)
            curve.density[i] = rf_charge_comb_log_likelihood(charges, n, nearby_coulomb * (1.0 + x)) -
                               teeth * log1p(x) - 0.5 * off * off;
        highest = fmax(highest, curve.density[i]);
    }
    for (int i = 0; i < curve.n; i++) curve.density[i] = exp(curve.density[i] - highest);
    return curve;
}

/* Mean and standard deviation within `reach` of `centre`; `share` is how much of the posterior lies there. */
static RfValue moments(const Curve *curve, double centre, double reach, double *share)
{
    double all = 0.0, mass = 0.0, mean = 0.0, square = 0.0;
    for (int i = 0; i < curve->n; i++) {
        all += curve->density[i];
        const double off = at(curve, i) - centre;
        if (fabs(off) > reach) continue;
        mass += curve->density[i];
        mean += curve->density[i] * off;
        square += curve->density[i] * off * off;
    }
    *share = mass / all;
    mean /= mass;
    return (RfValue){centre + mean, sqrt(fmax(square / mass - mean * mean, 0.0))};
}

static double peak_of(const Curve *curve)
{
    int best = 0;
    for (int i = 1; i < curve->n; i++)
        if (curve->density[i] > curve->density[best]) best = i;
    return at(curve, best);
}

bool rf_recording_unit_alone(const RfCombCharge *charges, size_t n, double nearby_coulomb, RfValue *x)
{
    const double sigma = finest(charges, n, nearby_coulomb);
    if (n == 0 || sigma > LARGEST_SIGMA) return false;
    const RfValue even = {0.0, 0.0};
    Curve wide = curve_new(charges, n, nearby_coulomb, even, 0.0, HALF_WINDOW);
    double share;
    const double peak = peak_of(&wide);
    moments(&wide, peak, 8.0 * sigma, &share);
    g_free(wide.density);
    if (share < 1.0 - MOST_ELSEWHERE) return false;
    Curve near = curve_new(charges, n, nearby_coulomb, even, peak, 8.0 * sigma);
    *x = moments(&near, peak, 8.0 * sigma, &share);
    g_free(near.density);
    x->sigma = fmax(x->sigma, 0.5 * sigma); /* a lone narrow tooth on a coarse grid */
    return x->sigma < LARGEST_SIGMA;
}

bool rf_recording_unit_given(const RfCombCharge *charges, size_t n, double nearby_coulomb, RfValue prior,
                             RfValue *x)
{
    if (n == 0) return false;
    Curve curve = curve_new(charges, n, nearby_coulomb, prior, prior.value, 6.0 * prior.sigma);
    double share;
    const RfValue seen = moments(&curve, prior.value, 6.0 * prior.sigma, &share);
    g_free(curve.density);
    const double before = 1.0 / (prior.sigma * prior.sigma);
    const double gain = 1.0 / (seen.sigma * seen.sigma) - before;
    if (!(gain > LEAST_GAIN * before)) return false;
    *x = (RfValue){(seen.value * (gain + before) - prior.value * before) / gain, 1.0 / sqrt(gain)};
    return true;
}
