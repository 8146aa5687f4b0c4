#include "physics/charge_budget.h"

#include <math.h>
#include <string.h>

#include "physics/physics_error.h"

static const char *const LINE_NAMES[RF_CHARGE_LINES] = {
    [RF_CHARGE_LINE_PATH] = "the droplet's own path",
    [RF_CHARGE_LINE_SCALE] = "scale",
    [RF_CHARGE_LINE_GAP] = "plate gap",
    [RF_CHARGE_LINE_VOLTAGE] = "voltage",
    [RF_CHARGE_LINE_GRAVITY] = "gravity",
    [RF_CHARGE_LINE_OIL_DENSITY] = "oil density",
    [RF_CHARGE_LINE_TEMPERATURE] = "temperature",
    [RF_CHARGE_LINE_PRESSURE] = "pressure",
    [RF_CHARGE_LINE_HUMIDITY] = "humidity",
    [RF_CHARGE_LINE_VISCOSITY] = "viscosity law",
    [RF_CHARGE_LINE_SLIP] = "slip law",
    [RF_CHARGE_LINE_AIR_DRIFT] = "drift of the air",
    [RF_CHARGE_LINE_EVAPORATION] = "evaporation",
};

const char *rf_charge_line_to_string(RfChargeLine line)
{
    return LINE_NAMES[line];
}

/* What the paths fix, in units of the stated scale. */
typedef struct {
    const RfChargeInputs *inputs;
    double settling_m_s, slope_m_s_V, diffusion_m2_s;
    double spread_share, radius_sigma_m, charge_sigma_coulomb, fall_leak_per_v;
    double evaporation_radius_m, evaporation_coulomb;
} Context;

/* x: one value per line. Scale, voltage and viscosity are factors about 1; slip is a factor of Cc - 1; path is in standard
 * deviations; the rest as stated. */
static RfMedium medium_at(const RfChargeInputs *inputs, const double *x)
{
    const double kelvin = x[RF_CHARGE_LINE_TEMPERATURE], pascal = x[RF_CHARGE_LINE_PRESSURE];
    const double law_pa_s = inputs->viscosity_law == RF_VISCOSITY_GIVEN
                                ? inputs->viscosity_pa_s.value
                                : rf_air_viscosity_pa_s(inputs->viscosity_law, kelvin);
    RfMedium medium = {
        .viscosity_pa_s = law_pa_s * x[RF_CHARGE_LINE_VISCOSITY],
        .air_density_kg_m3 = rf_air_density_kg_m3(kelvin, pascal, x[RF_CHARGE_LINE_HUMIDITY]),
        .temperature_kelvin = kelvin,
        .gravity_m_s2 = x[RF_CHARGE_LINE_GRAVITY],
        .plate_gap_m = x[RF_CHARGE_LINE_GAP],
    };
    /* Temperature moves the oil along its slope; the density's other parts are a line of their own. */
    const RfValue oil = rf_oil_density_kg_m3(&inputs->oil, (RfValue){kelvin, 0.0});
    medium.oil_density_kg_m3 = oil.value + x[RF_CHARGE_LINE_OIL_DENSITY];
    rf_drag_choose_slip(&medium, inputs->slip_law, inputs->slip_b_pa_m.value, pascal);
    medium.slip.alpha *= x[RF_CHARGE_LINE_SLIP];
    medium.slip.beta *= x[RF_CHARGE_LINE_SLIP];
    return medium;
}

static bool is_possible(const RfMedium *medium, const double *x)
{
    return medium->viscosity_pa_s > 0.0 && medium->slip.alpha > 0.0 && medium->plate_gap_m > 0.0 &&
           x[RF_CHARGE_LINE_SCALE] > 0.0 && x[RF_CHARGE_LINE_VOLTAGE] > 0.0 &&
           rf_drag_net_weight_n_m3(medium) > 0.0;
}

static bool radius_at(const Context *context, const RfMedium *medium, const double *x, double *radius_m)
{
    const double scale = x[RF_CHARGE_LINE_SCALE];
    const double settling_m_s = scale * context->settling_m_s - x[RF_CHARGE_LINE_AIR_DRIFT];
    if (settling_m_s <= 0.0) return false;
    *radius_m = rf_drag_radius_m(medium, settling_m_s);
    if (context->spread_share > 0.0) {
        const double spread_m =
            rf_drag_radius_of_diffusion_m(medium, scale * scale * context->diffusion_m2_s);
        *radius_m += context->spread_share * (spread_m - *radius_m);
    }
    return true;
}

/* Paths without shrinkage don't have this input at all. */
static bool has_evaporation(const RfChargeInputs *inputs)
{
    return inputs->evaporation_m2_s.sigma > 0.0;
}

static double evaporation_sigmas(const RfChargeInputs *inputs, const double *x)
{
    if (!has_evaporation(inputs)) return 0.0;
    return (x[RF_CHARGE_LINE_EVAPORATION] - inputs->evaporation_m2_s.value) / inputs->evaporation_m2_s.sigma;
}

static bool radius_model(const double *x, const void *user, double *radius_m)
{
    const Context *context = user;
    const RfMedium medium = medium_at(context->inputs, x);
    if (!is_possible(&medium, x) || !radius_at(context, &medium, x, radius_m)) return false;
    *radius_m += x[RF_CHARGE_LINE_PATH] * context->radius_sigma_m +
                 evaporation_sigmas(context->inputs, x) * context->evaporation_radius_m;
    return true;
}

/* Speed per volt: what the fall at this radius lacks of the fall that was seen is put down to the field. */
static double slope_at(const Context *context, const RfMedium *medium, const double *x, double radius_m)
{
    const double scale = x[RF_CHARGE_LINE_SCALE];
    const double fall_m_s = rf_drag_settling_speed_m_s(medium, radius_m) + x[RF_CHARGE_LINE_AIR_DRIFT];
    const double surplus_m_s = fall_m_s - scale * context->settling_m_s;
    return (context->slope_m_s_V * scale + context->fall_leak_per_v * surplus_m_s) /
           x[RF_CHARGE_LINE_VOLTAGE];
}

static bool charge_model(const double *x, const void *user, double *charge_coulomb)
{
    const Context *context = user;
    const RfMedium medium = medium_at(context->inputs, x);
    double radius_m = 0.0;
    if (!is_possible(&medium, x) || !radius_at(context, &medium, x, &radius_m)) return false;
    *charge_coulomb = rf_drag_coefficient_kg_s(&medium, radius_m) * medium.plate_gap_m *
                          slope_at(context, &medium, x, radius_m) +
                      x[RF_CHARGE_LINE_PATH] * context->charge_sigma_coulomb +
                      evaporation_sigmas(context->inputs, x) * context->evaporation_coulomb;
    return true;
}

/* Sigma of viscosity as a factor: the law's (or the given one's), and moisture that isn't applied. */
static double viscosity_relative_u(const RfChargeInputs *inputs)
{
    if (inputs->viscosity_law == RF_VISCOSITY_GIVEN)
        return inputs->viscosity_pa_s.sigma / inputs->viscosity_pa_s.value;
    return hypot(rf_air_viscosity_relative_u(inputs->viscosity_law),
                 rf_air_viscosity_moisture_relative_u(inputs->temperature_kelvin.value,
                                                      inputs->pressure_pa.value, inputs->humidity.value));
}

static double slip_relative_u(const RfChargeInputs *inputs)
{
    if (inputs->slip_law != RF_SLIP_ONE_TERM) return rf_drag_slip_relative_u(inputs->slip_law);
    return inputs->slip_b_pa_m.value > 0.0 ? inputs->slip_b_pa_m.sigma / inputs->slip_b_pa_m.value : 0.0;
}

/* The oil's own sigma (density and slope), without that of the temperature, which has its line. */
static double oil_sigma_kg_m3(const RfChargeInputs *inputs)
{
    return rf_oil_density_kg_m3(&inputs->oil, (RfValue){inputs->temperature_kelvin.value, 0.0}).sigma;
}

static void set_line(RfBudgetInput *lines, RfChargeLine line, double value, double sigma, RfSpread spread)
{
    lines[line] = (RfBudgetInput){LINE_NAMES[line], value, sigma, spread, 0.0, line != RF_CHARGE_LINE_PATH};
}

static void fill_lines(const RfChargeInputs *in, RfBudgetInput *lines)
{
    set_line(lines, RF_CHARGE_LINE_PATH, 0.0, 1.0, RF_SPREAD_NORMAL);
    set_line(lines, RF_CHARGE_LINE_SCALE, 1.0, in->scale_relative_u, RF_SPREAD_NORMAL);
    set_line(lines, RF_CHARGE_LINE_GAP, in->plate_gap_m.value, in->plate_gap_m.sigma, RF_SPREAD_NORMAL);
    set_line(lines, RF_CHARGE_LINE_VOLTAGE, 1.0, in->voltage_relative_u, RF_SPREAD_NORMAL);
    set_line(lines, RF_CHARGE_LINE_GRAVITY, in->gravity_m_s2.value, in->gravity_m_s2.sigma, RF_SPREAD_NORMAL);
    set_line(lines, RF_CHARGE_LINE_OIL_DENSITY, 0.0, oil_sigma_kg_m3(in), RF_SPREAD_NORMAL);
    set_line(lines, RF_CHARGE_LINE_TEMPERATURE, in->temperature_kelvin.value, in->temperature_kelvin.sigma,
             RF_SPREAD_NORMAL);
    set_line(lines, RF_CHARGE_LINE_PRESSURE, in->pressure_pa.value, in->pressure_pa.sigma, RF_SPREAD_NORMAL);
    set_line(lines, RF_CHARGE_LINE_HUMIDITY, in->humidity.value, in->humidity.sigma, RF_SPREAD_NORMAL);
    /* Laws: half-widths between published ones (air.h, drag.h); a given viscosity or b as stated. */
    const bool is_law = in->viscosity_law != RF_VISCOSITY_GIVEN,
               is_slip_law = in->slip_law != RF_SLIP_ONE_TERM;
    set_line(lines, RF_CHARGE_LINE_VISCOSITY, 1.0, viscosity_relative_u(in),
             is_law ? RF_SPREAD_RECTANGULAR : RF_SPREAD_NORMAL);
    set_line(lines, RF_CHARGE_LINE_SLIP, 1.0, slip_relative_u(in),
             is_slip_law ? RF_SPREAD_RECTANGULAR : RF_SPREAD_NORMAL);
    set_line(lines, RF_CHARGE_LINE_AIR_DRIFT, 0.0, in->air_drift_u_m_s, RF_SPREAD_NORMAL);
    set_line(lines, RF_CHARGE_LINE_EVAPORATION, in->evaporation_m2_s.value, in->evaporation_m2_s.sigma,
             RF_SPREAD_NORMAL);
}

RfMedium rf_charge_budget_medium(const RfChargeInputs *inputs)
{
    RfBudgetInput lines[RF_CHARGE_LINES];
    fill_lines(inputs, lines);
    double x[RF_CHARGE_LINES];
    for (int i = 0; i < RF_CHARGE_LINES; i++) x[i] = lines[i].value;
    return medium_at(inputs, x);
}

static RfBudget *budget_of(RfBudgetModel model, const RfChargeInputs *inputs,
                           const RfChargeEstimate *estimate, const RfBudgetOptions *options,
                           RfBudgetInput *inputs_out, GError **error)
{
    const RfMedium medium = rf_charge_budget_medium(inputs);
    const double radius_m = estimate->radius_m.value;
    if (!(radius_m > 0.0) || !(rf_drag_net_weight_n_m3(&medium) > 0.0)) {
        g_set_error(error, RF_PHYSICS_ERROR, RF_PHYSICS_ERROR_RANGE,
                    "radius %.4g m in oil of net weight %.4g N/m^3; need both positive for a budget",
                    radius_m, rf_drag_net_weight_n_m3(&medium));
        return NULL;
    }
    const double k = rf_drag_coefficient_kg_s(&medium, radius_m);
    const Context context = {inputs,
                             rf_drag_settling_speed_m_s(&medium, radius_m),
                             estimate->charge_coulomb.value / (k * medium.plate_gap_m),
                             rf_drag_diffusion_m2_s(&medium, radius_m),
                             estimate->spread_share,
                             estimate->radius_m.sigma,
                             estimate->charge_coulomb.sigma,
                             estimate->fall_leak_per_v,
                             estimate->evaporation_radius_m,
                             estimate->evaporation_coulomb};
    RfBudgetInput lines[RF_CHARGE_LINES];
    fill_lines(inputs, lines);
    if (inputs_out != NULL) memcpy(inputs_out, lines, sizeof lines);
    const size_t n = has_evaporation(inputs) ? RF_CHARGE_LINES : RF_CHARGE_LINE_EVAPORATION;
    return rf_budget_new(lines, n, NULL, model, &context, options, error);
}

RfBudget *rf_charge_budget_new(const RfChargeInputs *inputs, const RfChargeEstimate *estimate,
                               const RfBudgetOptions *options, RfBudgetInput *inputs_out, GError **error)
{
    return budget_of(charge_model, inputs, estimate, options, inputs_out, error);
}

RfBudget *rf_charge_budget_radius_new(const RfChargeInputs *inputs, const RfChargeEstimate *estimate,
                                      const RfBudgetOptions *options, RfBudgetInput *inputs_out,
                                      GError **error)
{
    return budget_of(radius_model, inputs, estimate, options, inputs_out, error);
}
