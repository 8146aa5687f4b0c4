#include "cli/conditions.h"

#include "calib/quantity.h"
#include "physics/air.h"
#include "physics/drag.h"
#include "physics/oil.h"

#include <math.h>

/* Everything that can be off, in SI. Laws enter as factors of 1 with the sigma of the law. */
typedef struct {
    RfValue scale_factor, gap_m, voltage_factor;
    RfValue density_kg_m3, density_slope;
    RfValue temperature_kelvin, pressure_pa, humidity, gravity_m_s2;
    RfValue viscosity_factor, slip_factor, slip_b_pa_m;
} Point;

typedef struct {
    RfViscosityLaw viscosity;
    double viscosity_pa_s; /* RF_VISCOSITY_GIVEN */
    RfSlipLaw slip;
    double density_at_kelvin;
} Laws;

static RfMedium medium_at(const Point *at, const Laws *laws)
{
    double temperature_kelvin = at->temperature_kelvin.value;
    RfOil oil = {at->density_kg_m3, laws->density_at_kelvin, at->density_slope};
    RfMedium medium = {
        .viscosity_pa_s = at->viscosity_factor.value * (laws->viscosity == RF_VISCOSITY_GIVEN
                                                            ? laws->viscosity_pa_s
                                                            : rf_air_viscosity_pa_s(laws->viscosity, temperature_kelvin)),
        .oil_density_kg_m3 = rf_oil_density_kg_m3(&oil, at->temperature_kelvin).value,
        .air_density_kg_m3 = rf_air_density_kg_m3(temperature_kelvin, at->pressure_pa.value, at->humidity.value),
        .temperature_kelvin = temperature_kelvin,
        .gravity_m_s2 = at->gravity_m_s2.value,
        .plate_gap_m = at->gap_m.value,
    };
    rf_drag_choose_slip(&medium, laws->slip, at->slip_b_pa_m.value, at->pressure_pa.value);
    return medium;
}

static void logs_at(const Point *at, const Laws *laws, double logs[RF_INPUTS])
{
    RfMedium medium = medium_at(at, laws);
    logs[RF_INPUT_SCALE] = log(at->scale_factor.value);
    logs[RF_INPUT_PLATE_GAP] = log(medium.plate_gap_m);
    logs[RF_INPUT_VOLTAGE] = log(at->voltage_factor.value);
    logs[RF_INPUT_OIL_DENSITY] = log(medium.oil_density_kg_m3);
    logs[RF_INPUT_AIR_DENSITY] = log(medium.air_density_kg_m3);
    logs[RF_INPUT_VISCOSITY] = log(medium.viscosity_pa_s);
    logs[RF_INPUT_MEAN_FREE_PATH] = log(medium.mean_free_path_m);
    logs[RF_INPUT_SLIP] = log(at->slip_factor.value);
    logs[RF_INPUT_TEMPERATURE] = log(medium.temperature_kelvin);
    logs[RF_INPUT_GRAVITY] = log(medium.gravity_m_s2);
}

/* What the report calls each input, and where it stands in a Point. */
static const struct {
    const char *name;
    size_t offset;
    double per_unit;  /* SI to the unit shown */
    const char *unit; /* "": shown as a factor; NULL: shown in percent of itself */
    double zero;      /* subtracted first: degrees Celsius */
} kinds[] = {
    {"scale of the picture", offsetof(Point, scale_factor), 100, NULL, 0},
    {"plate gap", offsetof(Point, gap_m), 1e3, "mm", 0},
    {"voltage", offsetof(Point, voltage_factor), 100, NULL, 0},
    {"oil density", offsetof(Point, density_kg_m3), 1, "kg/m^3", 0},
    {"slope of the oil density", offsetof(Point, density_slope), 1, "kg/m^3/K", 0},
    {"air temperature", offsetof(Point, temperature_kelvin), 1, "degC", 273.15},
    {"air pressure", offsetof(Point, pressure_pa), 1e-3, "kPa", 0},
    {"air humidity", offsetof(Point, humidity), 100, "%", 0},
    {"local gravity", offsetof(Point, gravity_m_s2), 1, "m/s^2", 0},
    {"viscosity law", offsetof(Point, viscosity_factor), 100, NULL, 0},
    {"slip law", offsetof(Point, slip_factor), 100, NULL, 0},
    {"slip constant b", offsetof(Point, slip_b_pa_m), 1e3, "mPa m", 0},
};

static RfValue *value_in(Point *point, size_t offset)
{
    return (RfValue *)(void *)((char *)point + offset);
}

static char *stated(RfValue value, double per_unit, const char *unit, double zero)
{
    if (!unit)
        return g_strdup_printf("%.2g %%", 100 * value.sigma / fabs(value.value));
    return rf_quantity_format((RfValue){(value.value - zero) * per_unit, value.sigma * per_unit}, unit);
}

static void common_input_free(void *data)
{
    RfCommonInput *input = data;
    g_free(input->name);
    g_free(input->stated);
    g_free(input);
}

static void add_input(GPtrArray *inputs, size_t kind, const Point *point, const Laws *laws, const double *logs)
{
    Point moved = *point;
    RfValue *value = value_in(&moved, kinds[kind].offset);
    if (!(value->sigma > 0))
        return;
    RfCommonInput *input = g_new0(RfCommonInput, 1);
    input->name = g_strdup(kinds[kind].name);
    input->stated = stated(*value, kinds[kind].per_unit, kinds[kind].unit, kinds[kind].zero);
    input->relative_u = value->value != 0 ? value->sigma / fabs(value->value) : 0;
    value->value += value->sigma;
    double moved_logs[RF_INPUTS];
    logs_at(&moved, laws, moved_logs);
    for (int i = 0; i < RF_INPUTS; i++)
        input->shift[i] = isfinite(moved_logs[i]) && isfinite(logs[i]) ? moved_logs[i] - logs[i] : 0;
    g_ptr_array_add(inputs, input);
}

/* Relative sigma of the supply: where polarities differ, the larger one stands for both. */
static double voltage_relative_u(const RfSettings *settings)
{
    double relative_u = 0;
    for (unsigned i = 0; i < settings->n_states; i++) {
        RfValue voltage;
        if (settings->states[i] != RF_FIELD_OFF && rf_settings_voltage(settings, settings->states[i], &voltage) &&
            voltage.value > 0)
            relative_u = fmax(relative_u, voltage.sigma / voltage.value);
    }
    return relative_u;
}

static Laws laws_of(const RfSettings *settings)
{
    return (Laws){
        .viscosity = settings->viscosity,
        .viscosity_pa_s = settings->viscosity_pa_s.is_set ? settings->viscosity_pa_s.v.value : 0,
        .slip = settings->slip,
        .density_at_kelvin = settings->density_at_kelvin.is_set ? settings->density_at_kelvin.v.value : 0,
    };
}

static double viscosity_relative_u(const RfSettings *settings, const Laws *laws)
{
    if (laws->viscosity == RF_VISCOSITY_GIVEN)
        return settings->viscosity_pa_s.v.sigma / settings->viscosity_pa_s.v.value;
    return hypot(rf_air_viscosity_relative_u(laws->viscosity),
                 rf_air_viscosity_moisture_relative_u(settings->temperature_kelvin.value, settings->pressure_pa.value,
                                                      settings->humidity.value));
}

static Point point_of(const RfSettings *settings, const Laws *laws, double scale_sigma_relative)
{
    return (Point){
        .scale_factor = {1, scale_sigma_relative},
        .gap_m = settings->plate_gap_m,
        .voltage_factor = {1, voltage_relative_u(settings)},
        .density_kg_m3 = settings->density_kg_m3,
        .density_slope =
            settings->density_slope_kg_m3_kelvin.is_set ? settings->density_slope_kg_m3_kelvin.v : (RfValue){0},
        .temperature_kelvin = settings->temperature_kelvin,
        .pressure_pa = settings->pressure_pa,
        .humidity = settings->humidity,
        .gravity_m_s2 = settings->gravity_m_s2,
        .viscosity_factor = {1, viscosity_relative_u(settings, laws)},
        .slip_factor = {1, laws->slip == RF_SLIP_ONE_TERM ? 0 : rf_drag_slip_relative_u(laws->slip)},
        .slip_b_pa_m = settings->slip_b_pa_m.is_set ? settings->slip_b_pa_m.v : (RfValue){0},
    };
}

RfConditions *rf_conditions_new(const RfSettings *settings, double scale_sigma_relative)
{
    Laws laws = laws_of(settings);
    Point point = point_of(settings, &laws, scale_sigma_relative);
    RfConditions *conditions = g_new0(RfConditions, 1);
    conditions->medium = medium_at(&point, &laws);
    conditions->pressure_pa = point.pressure_pa.value;
    conditions->inputs = g_ptr_array_new_with_free_func(common_input_free);
    double logs[RF_INPUTS];
    logs_at(&point, &laws, logs);
    for (size_t kind = 0; kind < G_N_ELEMENTS(kinds); kind++)
        add_input(conditions->inputs, kind, &point, &laws, logs);
    return conditions;
}

void rf_conditions_free(RfConditions *conditions)
{
    if (!conditions)
        return;
    g_ptr_array_unref(conditions->inputs);
    g_free(conditions);
}

double rf_conditions_effect(const RfCommonInput *input, const double slope[RF_INPUTS])
{
    double effect = 0;
    for (int i = 0; i < RF_INPUTS; i++)
        effect += slope[i] * input->shift[i];
    return effect;
}

double rf_conditions_common_u(const RfConditions *conditions, const double slope[RF_INPUTS])
{
    double sum2 = 0;
    for (guint i = 0; i < conditions->inputs->len; i++) {
        double effect = rf_conditions_effect(g_ptr_array_index(conditions->inputs, i), slope);
        sum2 += effect * effect;
    }
    return sqrt(sum2);
}
