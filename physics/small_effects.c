#include "physics/small_effects.h"

#include <gsl/gsl_math.h>
#include <math.h>

#include "physics/drag.h"

double rf_small_effects_plate_drag(double radius_m, double distance_m)
{
    return 9.0 / 8.0 * radius_m / distance_m;
}

double rf_small_effects_inertial_drag(const RfMedium *medium, double radius_m, double speed_m_s)
{
    const double reynolds =
        2.0 * radius_m * fabs(speed_m_s) * medium->air_density_kg_m3 / medium->viscosity_pa_s;
    return 3.0 / 16.0 * reynolds;
}

static double volume_m3(double radius_m)
{
    return 4.0 / 3.0 * M_PI * gsl_pow_3(radius_m);
}

double rf_small_effects_settling_time_s(const RfMedium *medium, double radius_m)
{
    return volume_m3(radius_m) * medium->oil_density_kg_m3 / rf_drag_coefficient_kg_s(medium, radius_m);
}

double rf_small_effects_image_charge(const RfMedium *medium, double radius_m, double charge_coulomb,
                                     double distance_m)
{
    const double vacuum_permittivity_f_m = 8.8541878128e-12; /* CODATA 2018 */
    const double pull_n = gsl_pow_2(charge_coulomb / distance_m) / (16.0 * M_PI * vacuum_permittivity_f_m);
    return pull_n / (volume_m3(radius_m) * rf_drag_net_weight_n_m3(medium));
}
