#include "cli/common_inputs.h"

#include <math.h>
#include <string.h>

/* The sheet's keys by which one input may be named in [shared]: the first that is there counts. */
typedef struct {
    const char *input, *keys[4];
} Names;

static const Names NAMES[] = {
    {"spacing", {"spacing"}},
    {"plane_ratio", {"plane_ratio"}},
    {"image", {"image"}},
    {"plate_gap", {"plate_gap"}},
    {"voltage", {"voltage", "voltage_top_plus", "voltage_top_minus"}},
    {"gravity", {"gravity", "latitude"}},
    {"density", {"density"}},
    {"density_slope", {"density_slope"}},
    {"temperature", {"temperature", "resistance"}},
    {"thermistor", {"uncertainty", "table", "a"}},
    {"pressure", {"pressure"}},
    {"humidity", {"humidity"}},
    {"viscosity", {"viscosity"}},
    {"slip", {"slip_b"}},
};

static const Names *names_of(const char *input)
{
    for (size_t i = 0; i < G_N_ELEMENTS(NAMES); i++)
        if (strcmp(NAMES[i].input, input) == 0) return &NAMES[i];
    return NULL;
}

/* (borrowed) or NULL */
static const char *shared_name(const GArray *shared, const char *input)
{
    const Names *names = names_of(input);
    for (size_t k = 0; names && k < G_N_ELEMENTS(names->keys) && names->keys[k]; k++)
        for (guint i = 0; i < shared->len; i++) {
            const RfUsedSetting *one = &g_array_index(shared, RfUsedSetting, i);
            if (strcmp(one->key, names->keys[k]) == 0) return one->value;
        }
    return NULL;
}

static bool is_input_key(const char *key)
{
    for (size_t i = 0; i < G_N_ELEMENTS(NAMES); i++)
        for (size_t k = 0; k < G_N_ELEMENTS(NAMES[i].keys) && NAMES[i].keys[k]; k++)
            if (strcmp(NAMES[i].keys[k], key) == 0) return true;
    return false;
}

static double square(double x)
{
    return x * x;
}

static double relative_variance(RfValue value)
{
    return value.value > 0 ? square(value.sigma / value.value) : 0;
}

/* Several inputs of one line add their variances; one alone is the line. */
static void add(RfResults *results, const RfSettings *settings, RfCommonRow row)
{
    if (!row.is_law) row.shared = g_strdup(shared_name(settings->shared, row.input));
    g_array_append_val(results->common, row);
}

static void add_alone(RfResults *results, const RfSettings *settings, RfChargeLine line, const char *input,
                      RfValue value, const char *unit)
{
    add(results, settings,
        (RfCommonRow){.input = input, .line = line, .line_share = 1, .value = value, .unit = unit});
}

static void add_scale(RfResults *results, const RfSettings *settings, double relative_u)
{
    const double all = square(relative_u), spacing = relative_variance(settings->spacing_m),
                 ratio = relative_variance(settings->plane_ratio);
    if (all <= 0) return;
    const double fit = fmax(all - spacing - ratio, 0);
    const RfCommonRow rows[] = {
        {.input = "spacing", .line_share = fmin(spacing / all, 1), .value = settings->spacing_m, .unit = "m"},
        {.input = "plane_ratio",
         .line_share = fmin(ratio / all, 1),
         .value = settings->plane_ratio,
         .unit = "1"},
        {.input = "image", .line_share = fit / all, .value = {1, sqrt(fit)}, .unit = "1"},
    };
    for (size_t i = 0; i < G_N_ELEMENTS(rows); i++) {
        RfCommonRow row = rows[i];
        row.line = RF_CHARGE_LINE_SCALE;
        add(results, settings, row);
    }
}

/* The supply's sigma is that of the less certain polarity (conditions.c). */
static void add_voltage(RfResults *results, const RfSettings *settings)
{
    RfValue worst = {0};
    for (int state = RF_FIELD_TOP_PLUS; state <= RF_FIELD_TOP_MINUS; state++) {
        RfValue voltage_V;
        if (rf_settings_voltage(settings, (RfFieldState)state, &voltage_V) && voltage_V.value > 0 &&
            (worst.value <= 0 || relative_variance(voltage_V) > relative_variance(worst)))
            worst = voltage_V;
    }
    add_alone(results, settings, RF_CHARGE_LINE_VOLTAGE, "voltage", worst, "V");
}

static void add_oil(RfResults *results, const RfSettings *settings, const RfOil *oil, double kelvin)
{
    const double own = square(oil->density_kg_m3.sigma);
    const double by_slope =
        oil->density_at_kelvin > 0
            ? square(oil->slope_kg_m3_per_kelvin.sigma * (kelvin - oil->density_at_kelvin))
            : 0;
    if (own + by_slope <= 0) return;
    add(results, settings,
        (RfCommonRow){.input = "density",
                      .line = RF_CHARGE_LINE_OIL_DENSITY,
                      .line_share = own / (own + by_slope),
                      .value = oil->density_kg_m3,
                      .unit = "kg m-3"});
    if (by_slope > 0)
        add(results, settings,
            (RfCommonRow){.input = "density_slope",
                          .line = RF_CHARGE_LINE_OIL_DENSITY,
                          .line_share = by_slope / (own + by_slope),
                          .value = oil->slope_kg_m3_per_kelvin,
                          .unit = "kg m-3 K-1"});
}

static void add_temperature(RfResults *results, const RfSettings *settings)
{
    const double all = square(settings->temperature_kelvin.sigma);
    const double law = settings->resistance_ohm.is_set ? fmin(square(settings->thermistor_u_kelvin), all) : 0;
    add(results, settings,
        (RfCommonRow){.input = "temperature",
                      .line = RF_CHARGE_LINE_TEMPERATURE,
                      .line_share = all > 0 ? (all - law) / all : 1,
                      .value = {settings->temperature_kelvin.value, sqrt(all - law)},
                      .unit = "K"});
    if (law > 0)
        add(results, settings,
            (RfCommonRow){.input = "thermistor",
                          .line = RF_CHARGE_LINE_TEMPERATURE,
                          .line_share = law / all,
                          .value = {0, sqrt(law)},
                          .unit = "K"});
}

static void add_laws(RfResults *results, const RfSettings *settings)
{
    if (settings->viscosity == RF_VISCOSITY_GIVEN)
        add_alone(results, settings, RF_CHARGE_LINE_VISCOSITY, "viscosity", settings->viscosity_pa_s.v,
                  "Pa s");
    else
        add(results, settings,
            (RfCommonRow){.input = "viscosity",
                          .line = RF_CHARGE_LINE_VISCOSITY,
                          .line_share = 1,
                          .value = {1, rf_air_viscosity_relative_u(settings->viscosity)},
                          .unit = "1",
                          .shared = g_strdup(rf_air_viscosity_law_to_string(settings->viscosity)),
                          .is_law = true});
    if (settings->slip == RF_SLIP_ONE_TERM)
        add_alone(results, settings, RF_CHARGE_LINE_SLIP, "slip", settings->slip_b_pa_m.v, "Pa m");
    else
        add(results, settings,
            (RfCommonRow){.input = "slip",
                          .line = RF_CHARGE_LINE_SLIP,
                          .line_share = 1,
                          .value = {1, rf_drag_slip_relative_u(settings->slip)},
                          .unit = "1",
                          .shared = g_strdup(rf_slip_law_to_string(settings->slip)),
                          .is_law = true});
}

/* Where no place is stated, the program's value stands for wherever the bench is: wrong by the same in all its recordings. */
static void add_gravity(RfResults *results, const RfSettings *settings)
{
    RfCommonRow row = {.input = "gravity",
                       .line = RF_CHARGE_LINE_GRAVITY,
                       .line_share = 1,
                       .value = settings->gravity_m_s2,
                       .unit = "m s-2"};
    bool is_stated = false;
    for (guint i = 0; i < settings->used->len; i++) {
        const RfUsedSetting *used = &g_array_index(settings->used, RfUsedSetting, i);
        is_stated |=
            strcmp(used->group, "cell") == 0 &&
            ((strcmp(used->key, "gravity") == 0 && !used->is_default) || strcmp(used->key, "latitude") == 0);
    }
    row.is_law = !is_stated;
    row.shared = is_stated ? NULL : g_strdup("no place stated");
    add(results, settings, row);
}

static void warn_of_idle_names(RfResults *results, const GArray *shared)
{
    for (guint i = 0; i < shared->len; i++) {
        const RfUsedSetting *one = &g_array_index(shared, RfUsedSetting, i);
        if (!is_input_key(one->key))
            rf_results_warn(results,
                            "[shared] %s=%s: charges don't hang on %s by itself, so the name shares nothing",
                            one->key, one->value, one->key);
    }
}

void rf_common_inputs_state(RfResults *results, const RfSettings *settings, const RfChargeInputs *inputs)
{
    add_scale(results, settings, inputs->scale_relative_u);
    add_alone(results, settings, RF_CHARGE_LINE_GAP, "plate_gap", inputs->plate_gap_m, "m");
    add_voltage(results, settings);
    add_gravity(results, settings);
    add_oil(results, settings, &inputs->oil, inputs->temperature_kelvin.value);
    add_temperature(results, settings);
    add_alone(results, settings, RF_CHARGE_LINE_PRESSURE, "pressure", inputs->pressure_pa, "Pa");
    add_alone(results, settings, RF_CHARGE_LINE_HUMIDITY, "humidity", inputs->humidity, "1");
    add_laws(results, settings);
    /* Its size is found from the paths; what it is, no two recordings share. */
    add_alone(results, settings, RF_CHARGE_LINE_AIR_DRIFT, "air_drift", (RfValue){0, 0}, "m s-1");
    warn_of_idle_names(results, settings->shared);
}

void rf_common_inputs_add_evaporation(RfResults *results, RfValue k_m2_s)
{
    RfCommonRow row = {.input = "evaporation",
                       .line = RF_CHARGE_LINE_EVAPORATION,
                       .line_share = 1,
                       .value = k_m2_s,
                       .unit = "m2 s-1"};
    g_array_append_val(results->common, row);
}
