#include "physics/oil.h"

#include <math.h>

RfValue rf_oil_density_kg_m3(const RfOil *oil, RfValue temperature_kelvin)
{
    if (oil->density_at_kelvin <= 0.0) return oil->density_kg_m3;
    const double warmer = temperature_kelvin.value - oil->density_at_kelvin;
    const double slope = oil->slope_kg_m3_per_kelvin.value;
    const double from_slope = warmer * oil->slope_kg_m3_per_kelvin.sigma;
    const double from_temperature = slope * temperature_kelvin.sigma;
    return (RfValue){oil->density_kg_m3.value + slope * warmer,
                     hypot(oil->density_kg_m3.sigma, hypot(from_slope, from_temperature))};
}
