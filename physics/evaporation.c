#include "physics/evaporation.h"

#include <gsl/gsl_cdf.h>
#include <math.h>

#include "physics/drag.h"
#include "physics/droplet_path.h"

enum { COLUMNS = 4 }; /* place, impulse of the field, time, shrinkage */

/* Displacement that K = 1 m^2/s brings: the integral of (v_g' - w V k'/k) (-1/(2 a)) (t - middle). */
static void fill_columns(const RfDropletPath *path, const RfMedium *medium, const RfDropletFit *fit,
                         double *columns)
{
    double a = fit->radius_m.value, k = rf_drag_coefficient_kg_s(medium, a);
    double fall_slope = rf_drag_settling_slope_per_s(medium, a);
    double field_slope =
        -fit->spell[0].speed_per_volt_m_s_v.value * rf_drag_coefficient_slope_kg_s_m(medium, a) / k;
    double middle_s = 0.5 * (path->times_s[0] + path->times_s[path->n - 1]), moved_m = 0;
    for (size_t i = 0; i < path->n; i++) {
        double *row = columns + i * COLUMNS;
        if (i > 0) {
            double from_s = path->times_s[i - 1], dt = path->times_s[i] - from_s;
            double impulse_v_s = path->total_impulse_v_s[i] - path->total_impulse_v_s[i - 1];
            double since_s = 0.5 * (from_s + path->times_s[i]) - middle_s;
            moved_m -= (fall_slope * dt + field_slope * impulse_v_s) * since_s / (2 * a);
        }
        row[0] = path->fall_m[i];
        row[1] = path->charged > 0 ? path->total_impulse_v_s[i] : 0;
        row[2] = path->times_s[i] - path->times_s[0];
        row[3] = moved_m;
    }
}

/* Drops the impulse where there was no field. */
static size_t compact(const RfDropletPath *path, double *columns)
{
    if (path->charged > 0) return COLUMNS;
    for (size_t i = 0; i < path->n; i++)
        for (size_t j = 0; j < COLUMNS - 1; j++)
            columns[i * (COLUMNS - 1) + j] = columns[i * COLUMNS + (j == 0 ? 0 : j + 1)];
    return COLUMNS - 1;
}

bool rf_evaporation_of(const RfTrail *trail, const RfDropletSet *set, const RfMedium *medium,
                       const RfDropletFit *fit, RfValue *k_m2_s)
{
    if (fit->state != RF_FIT_DONE || fit->spells != 1) return false;
    /* Without the common drift: shrinking droplets all slow down alike, which a drift would take for its own. */
    const RfDropletModel model = {.medium = medium, .timeline = set->timeline};
    g_autoptr(RfDropletPath) path = rf_droplet_path_new(trail, &model);
    g_autofree double *columns = g_new(double, path->n *COLUMNS);
    fill_columns(path, medium, fit, columns);
    size_t m = compact(path, columns);
    RfPathNoise noise = {fit->diffusion_m2_s.value, fit->fall_extra_variance_m2.value, set->fall_memory};
    double log_det, rest, log_det_information, coefficient[COLUMNS], covariance[COLUMNS * COLUMNS];
    if (!rf_path_likelihood_whiten(&noise, path->n, path->times_s, path->u_fall_m, m, columns, &log_det) ||
        !rf_path_likelihood_solve(path->n, m, columns, coefficient, covariance, &rest, &log_det_information))
        return false;
    *k_m2_s = (RfValue){coefficient[m - 2], sqrt(covariance[(m - 1) * (m - 1) - 1])};
    return isfinite(k_m2_s->value) && k_m2_s->sigma > 0;
}

RfEvaporation rf_evaporation_pool(const RfTrail *trails, const RfDropletSet *set, const RfMedium *medium)
{
    RfEvaporation found = {.p = 1};
    double weight = 0, sum = 0;
    for (size_t i = 0; i < set->n; i++) {
        RfValue k_m2_s;
        if (!rf_evaporation_of(&trails[i], set, medium, &set->droplets[i].fit, &k_m2_s)) continue;
        weight += 1 / (k_m2_s.sigma * k_m2_s.sigma);
        sum += k_m2_s.value / (k_m2_s.sigma * k_m2_s.sigma);
        found.droplets++;
    }
    if (found.droplets == 0) return found;
    found.k_m2_s = (RfValue){sum / weight, 1 / sqrt(weight)};
    found.p = 2 * gsl_cdf_ugaussian_Q(fabs(found.k_m2_s.value) / found.k_m2_s.sigma);
    return found;
}
