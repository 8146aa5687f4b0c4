#include "physics/droplet_fit.h"

#include <gsl/gsl_cdf.h>
#include <math.h>
#include <string.h>

#include "physics/constants.h"
#include "physics/drag.h"
#include "physics/droplet_path.h"
#include "physics/droplet_search.h"

static void fill_noise(const RfSearch *search, const RfSearchPoint *best, RfDropletFit *fit)
{
    fit->fall_extra_variance_m2.value = best->at[RF_FALL_NOISE] * search->noise_unit_m2;
    fit->fall_extra_variance_m2.sigma =
        sqrt(best->covariance[RF_FALL_NOISE][RF_FALL_NOISE]) * search->noise_unit_m2;
    fit->across_extra_variance_m2.value = best->at[RF_ACROSS_NOISE] * search->noise_unit_m2;
    fit->across_extra_variance_m2.sigma =
        sqrt(best->covariance[RF_ACROSS_NOISE][RF_ACROSS_NOISE]) * search->noise_unit_m2;
}

static void fill_radius(const RfSearch *search, const RfSearchPoint *best, RfDropletFit *fit)
{
    const RfMedium *medium = search->medium;
    double a = exp(best->at[RF_LOG_RADIUS]), u_log = sqrt(best->covariance[RF_LOG_RADIUS][RF_LOG_RADIUS]);
    double k = rf_drag_coefficient_kg_s(medium, a), slope = rf_drag_coefficient_slope_kg_s_m(medium, a);
    fit->radius_m = (RfValue){a, a * u_log};
    fit->fall_m_s = (RfValue){rf_drag_settling_speed_m_s(medium, a),
                              fabs(rf_drag_settling_slope_per_s(medium, a)) * a * u_log};
    double diffusion = rf_drag_diffusion_m2_s(medium, a);
    fit->diffusion_m2_s = (RfValue){diffusion, diffusion * fabs(slope) / k * a * u_log};
    fit->across_m_s = (RfValue){best->across.coefficient[0], sqrt(best->across.covariance[0])};
    fit->log_likelihood = best->log_likelihood;
}

/* d(charge of each column)/d(parameter), by central differences along radius and fall noise. */
static void charge_gradients(RfSearch *search, const RfSearchPoint *best, size_t columns,
                             double gradient[][2])
{
    for (int parameter = 0; parameter < 2; parameter++) {
        double h = search->step[parameter];
        RfAxisFit side[2];
        double factor[2];
        for (int s = 0; s < 2; s++) {
            double at[2] = {best->at[RF_LOG_RADIUS], best->at[RF_FALL_NOISE]};
            at[parameter] += s == 0 ? -h : h;
            rf_search_fall_axis(search, at[0], at[1], &side[s]);
            factor[s] = rf_drag_coefficient_kg_s(search->medium, exp(at[0])) * search->medium->plate_gap_m;
        }
        for (size_t j = 0; j < columns; j++)
            gradient[j][parameter] =
                (side[1].coefficient[j] * factor[1] - side[0].coefficient[j] * factor[0]) / (2 * h);
    }
}

/* Covariance of two charges: given the nonlinear parameters, plus what those bring. */
static double charge_covariance(const RfSearchPoint *best, double factor, size_t i, size_t j,
                                double gradient[][2])
{
    double sum = factor * factor * best->fall.covariance[i * best->fall.p + j];
    for (int r = 0; r < 2; r++)
        for (int c = 0; c < 2; c++) sum += gradient[i][r] * best->covariance[r][c] * gradient[j][c];
    return sum;
}

static void fill_spells(RfSearch *search, const RfSearchPoint *best, RfDropletFit *fit)
{
    const RfDropletPath *path = search->path;
    double gradient[RF_DROPLET_SPELLS_MAX][2];
    double factor =
        rf_drag_coefficient_kg_s(search->medium, fit->radius_m.value) * search->medium->plate_gap_m;
    charge_gradients(search, best, path->charged, gradient);
    fit->spells = path->spells;
    for (size_t k = 0; k < path->spells; k++) {
        RfSpellFit *spell = &fit->spell[k];
        size_t first = path->first[k], end = path->end[k];
        *spell =
            (RfSpellFit){.samples = end - first, .on_s = path->on_s[k], .has_charge = path->column[k] >= 0};
        spell->start_s = path->times_s[MIN(first, path->n - 1)];
        spell->end_s = path->times_s[end > first ? end - 1 : MIN(first, path->n - 1)];
        if (!spell->has_charge) continue;
        size_t j = (size_t)path->column[k];
        spell->speed_per_volt_m_s_v =
            (RfValue){best->fall.coefficient[j], sqrt(best->fall.covariance[j * best->fall.p + j])};
        spell->charge_coulomb = (RfValue){best->fall.coefficient[j] * factor,
                                          sqrt(charge_covariance(best, factor, j, j, gradient))};
        if (k + 1 < path->spells && path->column[k + 1] >= 0)
            spell->covariance_with_next_coulomb2 = charge_covariance(best, factor, j, j + 1, gradient);
    }
}

/* How the fit shares out what it sees, from a fit with the fall speed free at the summit: the spread's share of the
 * information on ln(radius), and what each spell's speed per volt gains per fall speed assumed. */
static void fill_shares(const RfSearch *search, const RfSearchPoint *best, RfDropletFit *fit)
{
    const RfDropletPath *path = search->path;
    RfSearch loose = *search;
    RfAxisFit fall;
    double a = exp(best->at[RF_LOG_RADIUS]);
    loose.is_loose = true;
    rf_search_fall_axis(&loose, best->at[RF_LOG_RADIUS], best->at[RF_FALL_NOISE], &fall);
    bool sees_fall = fall.p == path->charged + 1;
    double variance = sees_fall ? fall.covariance[fall.p * fall.p - 1] : 0;
    double slope_m_s = rf_drag_settling_slope_per_s(search->medium, a) * a;
    double information = sees_fall ? slope_m_s * slope_m_s / variance : 0;
    fit->spread_share = CLAMP(1 - information * best->covariance[RF_LOG_RADIUS][RF_LOG_RADIUS], 0, 1);
    for (size_t k = 0; k < path->spells; k++) {
        if (path->column[k] < 0) continue;
        size_t j = (size_t)path->column[k];
        double impulse_v_s = path->impulse_v_s[(path->n - 1) * path->charged + j];
        fit->spell[k].fall_leak_per_v = sees_fall ? fall.covariance[j * fall.p + fall.p - 1] / variance
                                        : impulse_v_s != 0 ? -path->on_s[k] / impulse_v_s
                                                           : 0;
    }
}

/* Radius from the fall alone and from the spread alone, from a fit whose fall speed is free. */
static void fill_two_radii(const RfSearch *search, const RfSearchPoint *loose, RfDropletFit *fit)
{
    const RfMedium *medium = search->medium;
    double a = exp(loose->at[RF_LOG_RADIUS]), u_log = sqrt(loose->covariance[RF_LOG_RADIUS][RF_LOG_RADIUS]);
    fit->radius_spread_m = (RfValue){a, a * u_log};
    if (loose->fall.p != search->path->charged + 1) return;
    size_t last = loose->fall.p - 1;
    double speed = loose->fall.coefficient[last],
           variance = loose->fall.covariance[last * loose->fall.p + last];
    double expected = rf_drag_settling_speed_m_s(medium, a);
    double u_expected = rf_drag_settling_slope_per_s(medium, a) * a * u_log;
    double z = fabs(speed - expected) / sqrt(variance + u_expected * u_expected);
    fit->radius_agreement_p = 2 * gsl_cdf_ugaussian_Q(z);
    if (!(speed > 2 * sqrt(variance))) return; /* no radius can be told from so uncertain a fall */
    double from_fall = rf_drag_radius_m(medium, speed);
    fit->radius_fall_m =
        (RfValue){from_fall, sqrt(variance) / rf_drag_settling_slope_per_s(medium, from_fall)};
}

/* Where the joint search starts: both radii, weighted; the fall is the surer one unless the droplet is tiny. */
static double joint_start(const RfDropletFit *fit, double fallback)
{
    double weight = 0, sum = 0;
    const RfValue *seen[] = {&fit->radius_fall_m, &fit->radius_spread_m};
    for (int i = 0; i < 2; i++) {
        if (!(seen[i]->sigma > 0)) continue;
        double w = seen[i]->value * seen[i]->value / (seen[i]->sigma * seen[i]->sigma);
        weight += w;
        sum += w * log(seen[i]->value);
    }
    return weight > 0 ? sum / weight : fallback;
}

static void see_radius_twice(RfSearch *search, RfSearchPoint *start, RfDropletFit *fit)
{
    RfSearchPoint loose = *start;
    search->is_loose = true;
    if (rf_search_climb(search, &loose)) {
        fill_two_radii(search, &loose, fit);
        memcpy(start->at, loose.at, sizeof start->at);
        start->at[RF_LOG_RADIUS] = joint_start(fit, loose.at[RF_LOG_RADIUS]);
    }
    search->is_loose = false;
}

void rf_droplet_fit(const RfTrail *trail, const RfDropletModel *model, RfDropletFit *fit)
{
    *fit = (RfDropletFit){.state = RF_FIT_TOO_SHORT, .radius_agreement_p = 1};
    if (trail->n < RF_DROPLET_SAMPLES_MIN) return;
    g_autoptr(RfDropletPath) path = rf_droplet_path_new(trail, model);
    RfSearch search;
    RfSearchPoint best;
    rf_search_init(&search, path, model, &best);
    see_radius_twice(&search, &best, fit);
    fit->state = RF_FIT_NO_MAXIMUM;
    if (!rf_search_climb(&search, &best)) return;
    fit->state = RF_FIT_DONE;
    fill_radius(&search, &best, fit);
    fill_noise(&search, &best, fit);
    fill_spells(&search, &best, fit);
    fill_shares(&search, &best, fit);
}

const char *rf_droplet_fit_state_to_string(RfFitState state)
{
    static const char *const names[] = {
        [RF_FIT_DONE] = "done", [RF_FIT_TOO_SHORT] = "too short", [RF_FIT_NO_MAXIMUM] = "no maximum"};
    return names[state];
}
