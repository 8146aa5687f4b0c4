/* Density of the oil at the droplet's temperature. Not for evaporation. */
#pragma once

#include "calib/units.h"

typedef struct {
    RfValue density_kg_m3;          /* as stated, at density_at_kelvin */
    double density_at_kelvin;       /* <= 0: holds at the temperature of the run */
    RfValue slope_kg_m3_per_kelvin; /* negative for liquids; mineral oils about -0.65 */
} RfOil;

/* Straight line about the stated point; sigma from density, slope and temperature, taken as independent. */
RfValue rf_oil_density_kg_m3(const RfOil *oil, RfValue temperature_kelvin);
