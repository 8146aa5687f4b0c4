/* How radius and charges answer to the common inputs with the data held fixed, and the profile of the radius.
 * The summit theta of L(theta; input) moves by d theta = information^-1 d(gradient)/d(input) d(input). */
#include <gsl/gsl_linalg.h>
#include <math.h>

#include "physics/drag.h"
#include "physics/droplet_search.h"

/* Relative change of an input; results are slopes, so any small number does. */
static const double CHANGE = 2e-3;

/* Slip as a whole: Cc - 1 times a factor, at any radius. */
static void scale_slip(RfMedium *medium, double factor)
{
    medium->slip.alpha *= factor;
    medium->slip.beta *= factor;
}

/* Voltage and gap act on the charge alone and are done without this. */
static void change_input(RfMedium *medium, double *stretch, RfInput input, double factor)
{
    switch (input) {
    case RF_INPUT_SCALE:
        *stretch *= factor;
        break;
    case RF_INPUT_OIL_DENSITY:
        medium->oil_density_kg_m3 *= factor;
        break;
    case RF_INPUT_AIR_DENSITY:
        medium->air_density_kg_m3 *= factor;
        break;
    case RF_INPUT_VISCOSITY:
        medium->viscosity_pa_s *= factor;
        break;
    case RF_INPUT_MEAN_FREE_PATH:
        medium->mean_free_path_m *= factor;
        break;
    case RF_INPUT_SLIP:
        scale_slip(medium, factor);
        break;
    case RF_INPUT_TEMPERATURE:
        medium->temperature_kelvin *= factor;
        break;
    case RF_INPUT_GRAVITY:
        medium->gravity_m_s2 *= factor;
        break;
    case RF_INPUT_PLATE_GAP:
    case RF_INPUT_VOLTAGE:
    case RF_INPUTS:
        break;
    }
}

typedef struct {
    RfSearch search;
    RfMedium medium;
} ChangedSearch;

static void changed_search(const RfSearch *base, RfInput input, double factor, ChangedSearch *changed)
{
    changed->medium = *base->medium;
    changed->search = *base;
    changed->search.medium = &changed->medium;
    change_input(&changed->medium, &changed->search.stretch, input, factor);
}

static void charges_at(const ChangedSearch *changed, const double *at, double *charge_coulomb)
{
    RfAxisFit fall;
    double factor =
        rf_drag_coefficient_kg_s(&changed->medium, exp(at[RF_LOG_RADIUS])) * changed->medium.plate_gap_m;
    rf_search_fall_axis(&changed->search, at[RF_LOG_RADIUS], at[RF_FALL_NOISE], &fall);
    for (size_t j = 0; j < changed->search.path->charged; j++)
        charge_coulomb[j] = fall.coefficient[j] * factor;
}

typedef struct {
    double at[RF_SEARCH_PARAMETERS], covariance[RF_SEARCH_PARAMETERS][RF_SEARCH_PARAMETERS];
} Summit;

static bool slope_of_input(const RfSearch *base, const Summit *summit, RfInput input, RfDropletFit *fit)
{
    ChangedSearch side[2];
    double gradient[2][RF_SEARCH_PARAMETERS], information[RF_SEARCH_PARAMETERS][RF_SEARCH_PARAMETERS], value;
    double moved[2][RF_SEARCH_PARAMETERS], charge[2][RF_DROPLET_SPELLS_MAX];
    for (int s = 0; s < 2; s++) {
        changed_search(base, input, 1 + (s == 0 ? -CHANGE : CHANGE), &side[s]);
        if (!rf_search_slopes(&side[s].search, summit->at, &value, gradient[s], information)) return false;
    }
    for (int i = 0; i < RF_SEARCH_PARAMETERS; i++) {
        double shift = 0;
        for (int j = 0; j < RF_SEARCH_PARAMETERS; j++)
            shift += summit->covariance[i][j] * (gradient[1][j] - gradient[0][j]) / 2;
        moved[0][i] = summit->at[i] - shift;
        moved[1][i] = summit->at[i] + shift;
    }
    fit->radius_slope[input] = (moved[1][RF_LOG_RADIUS] - moved[0][RF_LOG_RADIUS]) / (2 * CHANGE);
    for (int s = 0; s < 2; s++) charges_at(&side[s], moved[s], charge[s]);
    for (size_t k = 0; k < fit->spells; k++) {
        int column = base->path->column[k];
        fit->spell[k].charge_slope_coulomb[input] =
            column < 0 ? 0 : (charge[1][column] - charge[0][column]) / (2 * CHANGE);
    }
    return true;
}

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

void rf_droplet_fit_slopes(const RfTrail *trail, const RfDropletModel *model, RfDropletFit *fit)
{
    g_assert(fit->state == RF_FIT_DONE);
    g_autoptr(RfDropletPath) path = rf_droplet_path_new(trail, model);
    RfSearch search;
    RfSearchPoint start;
    Summit summit;
    rf_search_init(&search, path, model, &start);
    if (!find_summit(&search, fit, &summit)) return;
    for (int input = 0; input < RF_INPUTS; input++) slope_of_input(&search, &summit, (RfInput)input, fit);
    for (size_t k = 0; k < fit->spells; k++) {
        RfSpellFit *spell = &fit->spell[k];
        spell->charge_slope_coulomb[RF_INPUT_PLATE_GAP] = spell->charge_coulomb.value;
        spell->charge_slope_coulomb[RF_INPUT_VOLTAGE] = -spell->charge_coulomb.value;
    }
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
