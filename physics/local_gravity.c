#include "physics/local_gravity.h"

#include <gsl/gsl_math.h>
#include <math.h>

#include "physics/constants.h"
#include "physics/physics_error.h"

static double sin2_deg(double latitude_deg)
{
    const double s = sin(latitude_deg * M_PI / 180.0);
    return s * s;
}

double rf_local_gravity_normal_m_s2(double latitude_deg)
{
    const double equator_m_s2 = 9.7803253359, k = 0.00193185265241, e2 = 0.00669437999013;
    const double s2 = sin2_deg(latitude_deg);
    return equator_m_s2 * (1.0 + k * s2) / sqrt(1.0 - e2 * s2);
}

double rf_local_gravity_at_height_m_s2(double latitude_deg, double height_m)
{
    const double semi_major_m = 6378137.0, f = 1.0 / 298.257223563, m = 0.00344978650684;
    const double h = height_m / semi_major_m;
    const double factor = 1.0 - 2.0 * h * (1.0 + f + m - 2.0 * f * sin2_deg(latitude_deg)) + 3.0 * h * h;
    return rf_local_gravity_normal_m_s2(latitude_deg) * factor;
}

bool rf_local_gravity_estimate(double latitude_deg, double height_m, RfValue *gravity_m_s2, GError **error)
{
    if (!(fabs(latitude_deg) <= 90.0)) {
        g_set_error(error, RF_PHYSICS_ERROR, RF_PHYSICS_ERROR_RANGE, "latitude %.6g degrees; need -90 to 90",
                    latitude_deg);
        return false;
    }
    if (!(height_m >= -500.0 && height_m <= 9000.0)) {
        g_set_error(error, RF_PHYSICS_ERROR, RF_PHYSICS_ERROR_RANGE, "height %.6g m; need -500 to 9000 m",
                    height_m);
        return false;
    }
    *gravity_m_s2 = (RfValue){rf_local_gravity_at_height_m_s2(latitude_deg, height_m), 5.0e-4};
    return true;
}

RfValue rf_local_gravity_unknown(void)
{
    return (RfValue){RF_STANDARD_GRAVITY_M_S2, 0.035 / sqrt(3.0)};
}
