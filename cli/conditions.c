#include "cli/conditions.h"

#include "calib/quantity.h"

#include <math.h>

/* Relative sigma of the supply: where polarities differ, the less certain one stands for both. */
static double voltage_relative_u(const RfSettings *settings)
{
    double relative_u = 0;
    for (int state = RF_FIELD_TOP_PLUS; state <= RF_FIELD_TOP_MINUS; state++) {
        RfValue voltage;
        if (rf_settings_voltage(settings, (RfFieldState)state, &voltage) && voltage.value > 0)
            relative_u = fmax(relative_u, voltage.sigma / voltage.value);
    }
    return relative_u;
}

static RfOil oil_of(const RfSettings *settings)
{
    RfOil oil = {.density_kg_m3 = settings->density_kg_m3};
    if (settings->density_at_kelvin.is_set) {
        oil.density_at_kelvin = settings->density_at_kelvin.v.value;
        oil.slope_kg_m3_per_kelvin = settings->density_slope_kg_m3_kelvin.v;
    }
    return oil;
}

RfChargeInputs rf_conditions_of(const RfSettings *settings, double scale_relative_u)
{
    return (RfChargeInputs){
        .plate_gap_m = settings->plate_gap_m,
        .voltage_relative_u = voltage_relative_u(settings),
        .scale_relative_u = scale_relative_u,
        .gravity_m_s2 = settings->gravity_m_s2,
        .oil = oil_of(settings),
        .temperature_kelvin = settings->temperature_kelvin,
        .pressure_pa = settings->pressure_pa,
        .humidity = settings->humidity,
        .viscosity_law = settings->viscosity,
        .viscosity_pa_s = settings->viscosity_pa_s.is_set ? settings->viscosity_pa_s.v : (RfValue){0},
        .slip_law = settings->slip,
        .slip_b_pa_m = settings->slip_b_pa_m.is_set ? settings->slip_b_pa_m.v : (RfValue){0},
    };
}

static RfValue scaled(RfValue value, double factor)
{
    return (RfValue){value.value * factor, value.sigma * factor};
}

char *rf_conditions_stated(const RfChargeInputs *inputs, RfChargeLine line)
{
    switch (line) {
    case RF_CHARGE_LINE_PATH:
        return g_strdup("from its path");
    case RF_CHARGE_LINE_SCALE:
        return g_strdup_printf("known to %.2g %%", 100 * inputs->scale_relative_u);
    case RF_CHARGE_LINE_GAP:
        return rf_quantity_format(scaled(inputs->plate_gap_m, 1e3), "mm");
    case RF_CHARGE_LINE_VOLTAGE:
        return g_strdup_printf("known to %.2g %%", 100 * inputs->voltage_relative_u);
    case RF_CHARGE_LINE_GRAVITY:
        return rf_quantity_format(inputs->gravity_m_s2, "m/s^2");
    case RF_CHARGE_LINE_OIL_DENSITY:
        return rf_quantity_format(inputs->oil.density_kg_m3, "kg/m^3");
    case RF_CHARGE_LINE_TEMPERATURE:
        return rf_quantity_format(
            (RfValue){inputs->temperature_kelvin.value - 273.15, inputs->temperature_kelvin.sigma}, "degC");
    case RF_CHARGE_LINE_PRESSURE:
        return rf_quantity_format(scaled(inputs->pressure_pa, 1e-3), "kPa");
    case RF_CHARGE_LINE_HUMIDITY:
        return rf_quantity_format(scaled(inputs->humidity, 100), "%");
    case RF_CHARGE_LINE_VISCOSITY:
        return inputs->viscosity_law == RF_VISCOSITY_GIVEN
                   ? rf_quantity_format(scaled(inputs->viscosity_pa_s, 1e6), "uPa s")
                   : g_strdup(rf_air_viscosity_law_to_string(inputs->viscosity_law));
    case RF_CHARGE_LINE_SLIP:
        return inputs->slip_law == RF_SLIP_ONE_TERM
                   ? rf_quantity_format(scaled(inputs->slip_b_pa_m, 1e3), "mPa m")
                   : g_strdup(rf_slip_law_to_string(inputs->slip_law));
    case RF_CHARGE_LINE_AIR_DRIFT:
        return g_strdup_printf("0 within %.2g um/s", 1e6 * inputs->air_drift_u_m_s);
    case RF_CHARGE_LINE_EVAPORATION:
        return rf_quantity_format(scaled(inputs->evaporation_m2_s, 1e12), "um^2/s");
    case RF_CHARGE_LINES:
        break;
    }
    return g_strdup("");
}
