#include "physics/drag.h"

#include <gsl/gsl_errno.h>
#include <gsl/gsl_math.h>
#include <gsl/gsl_roots.h>
#include <math.h>
#include <string.h>

#include "physics/air.h"
#include "physics/constants.h"

typedef struct {
    const char *name;
    double alpha, beta, gamma;
    RfMeanFreePathReference path;
} Slip;

static const Slip SLIPS[] = {
    [RF_SLIP_KIM_2005] = {"kim-2005", 1.165, 0.483, 0.997, {67.3e-9, 296.15, 101300.0}},
    [RF_SLIP_ALLEN_RAABE_1985] = {"allen-raabe-1985", 1.142, 0.558, 0.999, {67.3e-9, 296.15, 101300.0}},
    [RF_SLIP_DAVIES_1945] = {"davies-1945", 1.257, 0.400, 1.10, {66.0e-9, 293.15, 101325.0}},
    [RF_SLIP_MILLIKAN_1923] = {"millikan-1923", 0.864, 0.29, 1.25, {94.17e-9, 296.15, 101325.0}},
    [RF_SLIP_ONE_TERM] = {"one-term", 1.0, 0.0, 1.0, {0.0, 296.15, 101325.0}},
};
enum { SLIPS_N = sizeof SLIPS / sizeof *SLIPS };

const char *rf_slip_law_to_string(RfSlipLaw law)
{
    return SLIPS[law].name;
}

bool rf_slip_law_from_string(const char *text, RfSlipLaw *law)
{
    for (int i = 0; i < SLIPS_N; i++) {
        if (strcmp(text, SLIPS[i].name) == 0) {
            *law = (RfSlipLaw)i;
            return true;
        }
    }
    return false;
}

void rf_drag_choose_slip(RfMedium *medium, RfSlipLaw law, double slip_b_pa_m, double pressure_pa)
{
    const Slip *slip = &SLIPS[law];
    medium->slip = (RfSlip){slip->alpha, slip->beta, slip->gamma};
    medium->mean_free_path_m =
        law == RF_SLIP_ONE_TERM
            ? slip_b_pa_m / pressure_pa
            : rf_air_mean_free_path_m(slip->path, medium->temperature_kelvin, pressure_pa);
}

double rf_drag_slip_relative_u(RfSlipLaw law)
{
    return law == RF_SLIP_ONE_TERM ? 0.0 : 0.042 / sqrt(3.0);
}

/* exp(-gamma/Kn), which vanishes without slip. */
static double free_molecular_weight(const RfMedium *medium, double radius_m)
{
    if (medium->mean_free_path_m <= 0.0) return 0.0;
    return exp(-medium->slip.gamma * radius_m / medium->mean_free_path_m);
}

double rf_drag_slip_factor(const RfMedium *medium, double radius_m)
{
    const double weight = medium->slip.beta * free_molecular_weight(medium, radius_m);
    return 1.0 + medium->mean_free_path_m / radius_m * (medium->slip.alpha + weight);
}

/* dCc/da, 1/m. */
static double slip_factor_slope(const RfMedium *medium, double radius_m)
{
    const double weight = medium->slip.beta * free_molecular_weight(medium, radius_m);
    return -medium->mean_free_path_m / (radius_m * radius_m) * (medium->slip.alpha + weight) -
           medium->slip.gamma * weight / radius_m;
}

double rf_drag_coefficient_kg_s(const RfMedium *medium, double radius_m)
{
    return 6.0 * M_PI * medium->viscosity_pa_s * radius_m / rf_drag_slip_factor(medium, radius_m);
}

double rf_drag_coefficient_slope_kg_s_m(const RfMedium *medium, double radius_m)
{
    const double slip = rf_drag_slip_factor(medium, radius_m);
    return rf_drag_coefficient_kg_s(medium, radius_m) *
           (1.0 / radius_m - slip_factor_slope(medium, radius_m) / slip);
}

double rf_drag_diffusion_m2_s(const RfMedium *medium, double radius_m)
{
    return RF_BOLTZMANN_J_K * medium->temperature_kelvin / rf_drag_coefficient_kg_s(medium, radius_m);
}

double rf_drag_net_weight_n_m3(const RfMedium *medium)
{
    return (medium->oil_density_kg_m3 - medium->air_density_kg_m3) * medium->gravity_m_s2;
}

double rf_drag_settling_speed_m_s(const RfMedium *medium, double radius_m)
{
    return 2.0 / 9.0 * rf_drag_net_weight_n_m3(medium) / medium->viscosity_pa_s * radius_m * radius_m *
           rf_drag_slip_factor(medium, radius_m);
}

double rf_drag_settling_slope_per_s(const RfMedium *medium, double radius_m)
{
    return rf_drag_settling_speed_m_s(medium, radius_m) *
           (2.0 / radius_m + slip_factor_slope(medium, radius_m) / rf_drag_slip_factor(medium, radius_m));
}

/* Positive root of a^2 + reach a = stokes^2, written so that nothing cancels. */
static double one_term_radius_m(double stokes2_m2, double reach_m)
{
    return 2.0 * stokes2_m2 / (reach_m + sqrt(reach_m * reach_m + 4.0 * stokes2_m2));
}

/* Two equations of one shape, a^power Cc(a)^sign = target: settling fixes a^2 Cc, drag fixes a/Cc. Both left sides
 * rise steadily with a. */
typedef struct {
    const RfMedium *medium;
    double target;
    bool is_settling;
} RadiusEquation;

static double radius_equation(double radius_m, void *context)
{
    const RadiusEquation *eq = context;
    const double slip = rf_drag_slip_factor(eq->medium, radius_m);
    return (eq->is_settling ? radius_m * radius_m * slip : radius_m / slip) / eq->target - 1.0;
}

static double root_between(RadiusEquation *context, double low, double high)
{
    /* Where exp(-gamma/Kn) underflows the two enclosing radii meet, and rounding may leave no change of sign. */
    if (radius_equation(high, context) <= 0.0) return high;
    if (radius_equation(low, context) >= 0.0) return low;

    gsl_function equation = {radius_equation, context};
    gsl_root_fsolver *solver = gsl_root_fsolver_alloc(gsl_root_fsolver_brent);
    double root = 0.5 * (low + high);
    if (gsl_root_fsolver_set(solver, &equation, low, high) == GSL_SUCCESS) {
        for (int i = 0; i < 100; i++) {
            if (gsl_root_fsolver_iterate(solver) != GSL_SUCCESS) break;
            root = gsl_root_fsolver_root(solver);
            low = gsl_root_fsolver_x_lower(solver);
            high = gsl_root_fsolver_x_upper(solver);
            if (gsl_root_test_interval(low, high, 0.0, 1e-12) == GSL_SUCCESS) break;
        }
    }
    gsl_root_fsolver_free(solver);
    return root;
}

double rf_drag_radius_m(const RfMedium *medium, double speed_m_s)
{
    const double stokes2_m2 = 4.5 * medium->viscosity_pa_s * speed_m_s / rf_drag_net_weight_n_m3(medium);
    const double path_m = medium->mean_free_path_m;
    const RfSlip *slip = &medium->slip;
    const double high = one_term_radius_m(stokes2_m2, path_m * slip->alpha);
    if (slip->beta == 0.0 || path_m == 0.0) return high;
    const double low = one_term_radius_m(stokes2_m2, path_m * (slip->alpha + slip->beta));
    RadiusEquation equation = {medium, stokes2_m2, true};
    return root_between(&equation, low, high);
}

/* Positive root of a^2 = stokes (a + reach). */
static double one_term_radius_of_drag_m(double stokes_m, double reach_m)
{
    return 0.5 * (stokes_m + sqrt(stokes_m * stokes_m + 4.0 * stokes_m * reach_m));
}

double rf_drag_radius_of_coefficient_m(const RfMedium *medium, double coefficient_kg_s)
{
    const double stokes_m = coefficient_kg_s / (6.0 * M_PI * medium->viscosity_pa_s);
    const double path_m = medium->mean_free_path_m;
    const RfSlip *slip = &medium->slip;
    const double low = one_term_radius_of_drag_m(stokes_m, path_m * slip->alpha);
    if (slip->beta == 0.0 || path_m == 0.0) return low;
    const double high = one_term_radius_of_drag_m(stokes_m, path_m * (slip->alpha + slip->beta));
    RadiusEquation equation = {medium, stokes_m, false};
    return root_between(&equation, low, high);
}

double rf_drag_radius_of_diffusion_m(const RfMedium *medium, double diffusion_m2_s)
{
    return rf_drag_radius_of_coefficient_m(medium,
                                           RF_BOLTZMANN_J_K * medium->temperature_kelvin / diffusion_m2_s);
}
