#include "physics/air.h"

#include <math.h>
#include <string.h>

#include "physics/constants.h"

static const double SUTHERLAND_KELVIN = 110.4;

static const char *const LAW_NAMES[] = {"iso-15900", "us-1976", "given"};

const char *rf_air_viscosity_law_to_string(RfViscosityLaw law)
{
    return LAW_NAMES[law];
}

bool rf_air_viscosity_law_from_string(const char *text, RfViscosityLaw *law)
{
    for (int i = 0; i < 3; i++) {
        if (strcmp(text, LAW_NAMES[i]) == 0) {
            *law = (RfViscosityLaw)i;
            return true;
        }
    }
    return false;
}

double rf_air_viscosity_pa_s(RfViscosityLaw law, double temperature_kelvin)
{
    const double t = temperature_kelvin;
    if (law == RF_VISCOSITY_US_1976) return 1.458e-6 * t * sqrt(t) / (t + SUTHERLAND_KELVIN);
    const double t0 = 296.15;
    return 1.83245e-5 * pow(t / t0, 1.5) * (t0 + SUTHERLAND_KELVIN) / (t + SUTHERLAND_KELVIN);
}

double rf_air_viscosity_relative_u(RfViscosityLaw law)
{
    switch (law) {
    case RF_VISCOSITY_ISO_15900:
        return 0.0026 / sqrt(3.0);
    case RF_VISCOSITY_US_1976:
        return 0.0040 / sqrt(3.0);
    case RF_VISCOSITY_GIVEN:
        return 0.0;
    }
    return 0.0;
}

double rf_air_viscosity_slope_per_kelvin(double temperature_kelvin)
{
    return 1.5 / temperature_kelvin - 1.0 / (temperature_kelvin + SUTHERLAND_KELVIN);
}

double rf_air_viscosity_moisture_relative_u(double temperature_kelvin, double pressure_pa, double humidity)
{
    return 0.10 * rf_air_water_mole_fraction(temperature_kelvin, pressure_pa, humidity) / sqrt(3.0);
}

double rf_air_mean_free_path_m(RfMeanFreePathReference reference, double temperature_kelvin,
                               double pressure_pa)
{
    const double ratio = temperature_kelvin / reference.temperature_kelvin;
    return reference.path_m * ratio * ratio * (reference.pressure_pa / pressure_pa) *
           (reference.temperature_kelvin + SUTHERLAND_KELVIN) / (temperature_kelvin + SUTHERLAND_KELVIN);
}

double rf_air_saturation_pressure_pa(double temperature_kelvin)
{
    const double t = temperature_kelvin;
    return exp(1.2378847e-5 * t * t - 1.9121316e-2 * t + 33.93711047 - 6.3431645e3 / t);
}

double rf_air_water_mole_fraction(double temperature_kelvin, double pressure_pa, double humidity)
{
    const double celsius = temperature_kelvin - RF_ZERO_CELSIUS_KELVIN;
    const double enhancement = 1.00062 + 3.14e-8 * pressure_pa + 5.6e-7 * celsius * celsius;
    return humidity * enhancement * rf_air_saturation_pressure_pa(temperature_kelvin) / pressure_pa;
}

/* Compressibility factor Z of moist air, CIPM-2007 eq. A1.4. */
static double compressibility(double kelvin, double pressure_pa, double water)
{
    const double t = kelvin - RF_ZERO_CELSIUS_KELVIN;
    const double p_over_t = pressure_pa / kelvin;
    const double first = 1.58123e-6 - 2.9331e-8 * t + 1.1043e-10 * t * t + (5.707e-6 - 2.051e-8 * t) * water +
                         (1.9898e-4 - 2.376e-6 * t) * water * water;
    const double second = 1.83e-11 - 0.765e-8 * water * water;
    return 1.0 - p_over_t * first + p_over_t * p_over_t * second;
}

double rf_air_density_kg_m3(double temperature_kelvin, double pressure_pa, double humidity)
{
    const double gas_constant_2006 = 8.314472; /* J/(mol K); CODATA 2006, part of the equation */
    const double dry_kg_mol = 28.96546e-3, water_kg_mol = 18.01528e-3;
    const double water = rf_air_water_mole_fraction(temperature_kelvin, pressure_pa, humidity);
    const double z = compressibility(temperature_kelvin, pressure_pa, water);
    return pressure_pa * dry_kg_mol / (z * gas_constant_2006 * temperature_kelvin) *
           (1.0 - water * (1.0 - water_kg_mol / dry_kg_mol));
}
