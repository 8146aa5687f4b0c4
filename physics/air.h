/* Properties of air that a falling droplet feels: viscosity, mean free path, moist density, each with the
 * relative standard uncertainty that belongs in a budget. Not for drag (drag.h). Temperatures in kelvin,
 * pressures in pascal, relative humidity as a fraction 0..1. Pure; safe from any thread. Written for rooms:
 * 273..313 K, 60..110 kPa; the formulas hold wider, the stated uncertainties don't. */
#pragma once

#include <stdbool.h>

typedef enum {
    RF_VISCOSITY_ISO_15900, /* 1.83245e-5 Pa s at 296.15 K, Sutherland 110.4 K (ISO 15900, eq. 3; Kim et al.
                               2005) */
    RF_VISCOSITY_US_1976, /* 1.458e-6 T^1.5/(T + 110.4 K) (U.S. Standard Atmosphere 1976, eq. 51; ISO 2533) */
    RF_VISCOSITY_GIVEN,   /* a number from outside, with its own uncertainty */
} RfViscosityLaw;

/* "iso-15900", "us-1976", "given". */
const char *rf_air_viscosity_law_to_string(RfViscosityLaw law);
bool rf_air_viscosity_law_from_string(const char *text, RfViscosityLaw *law);

/* Dry air near 1 atm. law must not be RF_VISCOSITY_GIVEN. */
double rf_air_viscosity_pa_s(RfViscosityLaw law, double temperature_kelvin);

/* Relative standard uncertainty of the law itself (not of the temperature put in). Published laws disagree by
 * 0.4 % at 23 degC: 1.8277e-5 (US 1976), 1.8301(3)e-5 (Hopper and Laby 1941), 1.8325e-5 (ISO
 * 15900), 1.8349e-5 and 1.8351e-5 Pa s (Irvine and Liley 1984; MHTL 8406, 1984). Without a reason to trust
 * one, the true value is taken as rectangular about the chosen law, reaching to the furthest of the others:
 *   ISO 15900: 0.26 %/sqrt(3) = 0.15 %;   US 1976: 0.40 %/sqrt(3) = 0.23 %;   given: 0, its sigma is the
 * caller's. Charge goes as viscosity^1.5, so ISO 15900 brings 0.22 % into every charge, common to all
 * droplets. */
double rf_air_viscosity_relative_u(RfViscosityLaw law);

/* d ln(viscosity)/dT of Sutherland's form, 1/K: about +0.26 % per kelvin at 23 degC. */
double rf_air_viscosity_slope_per_kelvin(double temperature_kelvin);

/* Moist air is slightly less viscous than dry air: measured fits give about -0.10 times the mole fraction of
 * water (from memory: Zuckerwar and Meredith 1985; a kinetic mixing rule gives up to five times more and is
 * known to overstate it). Not applied; the whole effect is the half-width of a rectangular: 0.1 x_v/sqrt(3),
 * 0.07 % at 23 degC and 45 %. */
double rf_air_viscosity_moisture_relative_u(double temperature_kelvin, double pressure_pa, double humidity);

/* Mean free path grown from a reference (path_m at t_kelvin, p_pa) as ISO 15900 eq. 4 does:
 * l = l0 (T/T0)^2 (p0/p) (T0 + 110.4)/(T + 110.4). Which reference belongs to which slip law: drag.h. */
typedef struct {
    double path_m, temperature_kelvin, pressure_pa;
} RfMeanFreePathReference;

double rf_air_mean_free_path_m(RfMeanFreePathReference reference, double temperature_kelvin,
                               double pressure_pa);

/* Saturation vapour pressure over water, and mole fraction of water in moist air, CIPM-2007 (below). */
double rf_air_saturation_pressure_pa(double temperature_kelvin);
double rf_air_water_mole_fraction(double temperature_kelvin, double pressure_pa, double humidity);

/* Density of moist air, CIPM-2007 with 400 umol/mol of CO2: A. Picard, R. S. Davis, M. Glaser, K. Fujii,
 * Metrologia 45 (2008) 149. Stated for 288..300 K, 60..110 kPa. The equation's own relative standard
 * uncertainty is 22e-6 (same paper), which doesn't count: air is 1/750 of oil. */
double rf_air_density_kg_m3(double temperature_kelvin, double pressure_pa, double humidity);
