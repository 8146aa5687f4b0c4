#include "physics/evaporation.h"

#include <gsl/gsl_cdf.h>
#include <math.h>

#include "physics/drag.h"
#include "physics/droplet_path.h"

/* Place, impulse of the field, time; then the trends, of which one at a time is fitted. */
enum { PLACE, IMPULSE, TIME, SHRINKAGE, AIR, COLUMNS };

static const double SIGNIFICANT_P = 1e-3;

/* Displacement that K = 1 m^2/s brings: the integral of (v_g' - w V k'/k) (-1/(2 a)) (t - middle); and that of air that
 * gains 1 m/s every second. */
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
        row[PLACE] = path->fall_m[i];
        row[IMPULSE] = path->total_impulse_v_s[i];
        row[TIME] = path->times_s[i] - path->times_s[0];
        row[SHRINKAGE] = moved_m;
        row[AIR] = 0.5 * pow(path->times_s[i] - middle_s, 2);
    }
}

/* One trend on whitened columns, the impulse only where there was a field. */
static bool solve_trend(const RfDropletPath *path, const double *columns, int trend, RfValue *found)
{
    const int with_field[] = {PLACE, IMPULSE, TIME, trend}, without[] = {PLACE, TIME, trend};
    const int *chosen = path->charged > 0 ? with_field : without;
    size_t m = path->charged > 0 ? G_N_ELEMENTS(with_field) : G_N_ELEMENTS(without);
    g_autofree double *part = g_new(double, path->n *m);
    for (size_t i = 0; i < path->n; i++)
        for (size_t j = 0; j < m; j++) part[i * m + j] = columns[i * COLUMNS + (size_t)chosen[j]];
    double rest, log_det_information, coefficient[COLUMNS], covariance[COLUMNS * COLUMNS];
    if (!rf_path_likelihood_solve(path->n, m, part, coefficient, covariance, &rest, &log_det_information))
        return false;
    *found = (RfValue){coefficient[m - 2], sqrt(covariance[(m - 1) * (m - 1) - 1])};
    return isfinite(found->value) && found->sigma > 0;
}

typedef struct {
    RfValue k_m2_s, air_m_s2;
} Trends;

static bool trends_of(const RfTrail *trail, const RfDropletModel *model, const RfDropletFit *fit,
                      Trends *trends)
{
    if (fit->state != RF_FIT_DONE || fit->spells != 1) return false;
    const RfDropletModel plain = {.medium = model->medium, .timeline = model->timeline};
    g_autoptr(RfDropletPath) path = rf_droplet_path_new(trail, &plain);
    g_autofree double *columns = g_new(double, path->n *COLUMNS);
    fill_columns(path, model->medium, fit, columns);
    RfPathNoise noise = {fit->diffusion_m2_s.value, fit->fall_extra_variance_m2.value, model->fall_memory};
    double log_det;
    return rf_path_likelihood_whiten(&noise, path->n, path->times_s, path->u_fall_m, COLUMNS, columns,
                                     &log_det) &&
           solve_trend(path, columns, SHRINKAGE, &trends->k_m2_s) &&
           solve_trend(path, columns, AIR, &trends->air_m_s2);
}

bool rf_evaporation_of(const RfTrail *trail, const RfDropletModel *model, const RfDropletFit *fit,
                       RfValue *k_m2_s)
{
    Trends trends;
    if (!trends_of(trail, model, fit, &trends)) return false;
    *k_m2_s = trends.k_m2_s;
    return true;
}

typedef struct {
    double weight, sum;
} Mean;

static void mean_add(Mean *mean, RfValue value)
{
    mean->weight += 1 / (value.sigma * value.sigma);
    mean->sum += value.value / (value.sigma * value.sigma);
}

/* Twice the log-likelihood that the mean gains over none. */
static double twice_gain(const Mean *mean)
{
    return mean->sum * mean->sum / mean->weight;
}

/* A tenth of K is what its first order may miss. */
static double chance_of_spread(const GArray *each_m2_s, double k_m2_s)
{
    double squares = 0;
    for (unsigned i = 0; i < each_m2_s->len; i++) {
        const RfValue *one = &g_array_index(each_m2_s, RfValue, i);
        squares += pow((one->value - k_m2_s) / hypot(one->sigma, 0.1 * k_m2_s), 2);
    }
    return each_m2_s->len > 1 ? gsl_cdf_chisq_Q(squares, each_m2_s->len - 1) : 1;
}

RfEvaporation rf_evaporation_pool(const RfTrail *trails, const RfDropletFit *const *fits, size_t n,
                                  const RfDropletModel *model)
{
    RfEvaporation found = {.p = 1, .alike_p = 1};
    g_autoptr(GArray) each_m2_s = g_array_new(FALSE, FALSE, sizeof(RfValue));
    Mean shrinkage = {0}, air = {0};
    for (size_t i = 0; i < n; i++) {
        Trends trends;
        if (!trends_of(&trails[i], model, fits[i], &trends)) continue;
        mean_add(&shrinkage, trends.k_m2_s);
        mean_add(&air, trends.air_m_s2);
        g_array_append_val(each_m2_s, trends.k_m2_s);
    }
    found.droplets = each_m2_s->len;
    if (found.droplets == 0) return found;
    found.k_m2_s = (RfValue){shrinkage.sum / shrinkage.weight, 1 / sqrt(shrinkage.weight)};
    found.p = 2 * gsl_cdf_ugaussian_Q(fabs(found.k_m2_s.value) / found.k_m2_s.sigma);
    found.air_log_odds = 0.5 * (twice_gain(&air) - twice_gain(&shrinkage));
    found.alike_p = chance_of_spread(each_m2_s, found.k_m2_s.value);
    return found;
}

bool rf_evaporation_is_plain(const RfEvaporation *evaporation)
{
    return evaporation->p < SIGNIFICANT_P && evaporation->k_m2_s.value > 0 && evaporation->air_log_odds < 0 &&
           evaporation->alike_p > SIGNIFICANT_P;
}

/* Radius so long after the middle; never below a quarter of what it is there, where a law of slow change is out. */
static double radius_at_m(double middle_m, double k_m2_s, double since_s)
{
    return sqrt(fmax(middle_m * middle_m - k_m2_s * since_s, middle_m * middle_m / 16));
}

RfSample *rf_evaporation_undo(const RfTrail *trail, const RfDropletModel *model, const RfDropletFit *fit,
                              double k_m2_s)
{
    RfSample *samples = g_memdup2(trail->samples, trail->n * sizeof *samples);
    if (fit->state != RF_FIT_DONE || trail->n == 0) return samples;
    const RfMedium *medium = model->medium;
    double a = fit->radius_m.value, k = rf_drag_coefficient_kg_s(medium, a), moved_m = 0;
    double fall_m_s = rf_drag_settling_speed_m_s(medium, a);
    double middle_s = 0.5 * (samples[0].time_s + samples[trail->n - 1].time_s);
    size_t spell = 0;
    for (size_t i = 1; i < trail->n; i++) {
        double from_s = samples[i - 1].time_s, to_s = samples[i].time_s;
        double radius_m = radius_at_m(a, k_m2_s, 0.5 * (from_s + to_s) - middle_s);
        double impulse_v_s = rf_field_timeline_impulse_v_s(model->timeline, to_s) -
                             rf_field_timeline_impulse_v_s(model->timeline, from_s);
        while (spell + 1 < fit->spells && to_s > fit->spell[spell].end_s) spell++;
        moved_m += (rf_drag_settling_speed_m_s(medium, radius_m) - fall_m_s) * (to_s - from_s);
        moved_m += fit->spell[spell].speed_per_volt_m_s_v.value * impulse_v_s *
                   (k / rf_drag_coefficient_kg_s(medium, radius_m) - 1);
        samples[i].fall_m -= moved_m;
    }
    return samples;
}
