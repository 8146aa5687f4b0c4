/* The profile of the radius: how far the likelihood, at its best over all else, carries. */
#include <gsl/gsl_linalg.h>
#include <math.h>

#include "physics/droplet_search.h"

typedef struct {
    double at[RF_SEARCH_PARAMETERS], covariance[RF_SEARCH_PARAMETERS][RF_SEARCH_PARAMETERS];
} Summit;

static bool find_summit(const RfSearch *search, const RfDropletFit *fit, Summit *summit)
{
    double value, gradient[RF_SEARCH_PARAMETERS];
    summit->at[RF_LOG_RADIUS] = log(fit->radius_m.value);
    summit->at[RF_FALL_NOISE] = fit->fall_extra_variance_m2.value / search->noise_unit_m2;
    summit->at[RF_ACROSS_NOISE] = fit->across_extra_variance_m2.value / search->noise_unit_m2;
    if (!rf_search_slopes(search, summit->at, &value, gradient, summit->covariance)) return false;
    gsl_matrix_view view =
        gsl_matrix_view_array(summit->covariance[0], RF_SEARCH_PARAMETERS, RF_SEARCH_PARAMETERS);
    return gsl_linalg_cholesky_decomp1(&view.matrix) == 0 && gsl_linalg_cholesky_invert(&view.matrix) == 0;
}

/* Best value with the radius held: Newton on each noise parameter by itself, since each is seen by one axis only. */
static double held_axis(const RfSearch *search, int parameter, double log_radius, double *noise)
{
    double (*axis)(const RfSearch *, double, double, RfAxisFit *) =
        parameter == RF_FALL_NOISE ? rf_search_fall_axis : rf_search_across_axis;
    double h = search->step[parameter], value = axis(search, log_radius, *noise, NULL);
    for (int i = 0; i < 20; i++) {
        double up = axis(search, log_radius, *noise + h, NULL),
               down = axis(search, log_radius, *noise - h, NULL);
        double slope = (up - down) / (2 * h), curve = (up - 2 * value + down) / (h * h);
        if (!(curve < 0)) break;
        double step = fmax(-0.5, fmin(0.5, -slope / curve)),
               risen = axis(search, log_radius, *noise + step, NULL);
        if (risen < value + 1e-7) break;
        *noise += step;
        value = risen;
    }
    return value;
}

static double held_radius(const RfSearch *search, double log_radius, double *noise)
{
    return held_axis(search, RF_FALL_NOISE, log_radius, &noise[RF_FALL_NOISE]) +
           held_axis(search, RF_ACROSS_NOISE, log_radius, &noise[RF_ACROSS_NOISE]);
}

/* Distance from the summit at which the profile has come down by 1/2, by secant in the square root of the drop. */
static bool half_down(const RfSearch *search, const Summit *summit, double top, double sigma, double side,
                      double *at)
{
    double distance = sigma;
    for (int i = 0; i < 30; i++) {
        double noise[RF_SEARCH_PARAMETERS] = {0, summit->at[RF_FALL_NOISE], summit->at[RF_ACROSS_NOISE]};
        double drop = top - held_radius(search, summit->at[RF_LOG_RADIUS] + side * distance, noise);
        *at = summit->at[RF_LOG_RADIUS] + side * distance;
        if (fabs(drop - 0.5) < 1e-3) return true;
        distance *= fmax(0.5, fmin(2, sqrt(0.5 / fmax(drop, 1e-6))));
    }
    return false;
}

bool rf_droplet_fit_profile_radius(const RfTrail *trail, const RfDropletModel *model, const RfDropletFit *fit,
                                   double *low_m, double *high_m)
{
    g_assert(fit->state == RF_FIT_DONE);
    g_autoptr(RfDropletPath) path = rf_droplet_path_new(trail, model);
    RfSearch search;
    RfSearchPoint start;
    Summit summit;
    rf_search_init(&search, path, model, &start);
    if (!find_summit(&search, fit, &summit)) return false;
    double noise[RF_SEARCH_PARAMETERS] = {0, summit.at[RF_FALL_NOISE], summit.at[RF_ACROSS_NOISE]}, low, high;
    double top = held_radius(&search, summit.at[RF_LOG_RADIUS], noise);
    double sigma = sqrt(summit.covariance[RF_LOG_RADIUS][RF_LOG_RADIUS]);
    if (!half_down(&search, &summit, top, sigma, -1, &low) ||
        !half_down(&search, &summit, top, sigma, 1, &high))
        return false;
    *low_m = exp(low);
    *high_m = exp(high);
    return true;
}
