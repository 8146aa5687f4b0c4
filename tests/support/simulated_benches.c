#include "tests/support/simulated_benches.h"

#include <glib.h>
#include <gsl/gsl_randist.h>
#include <math.h>
#include <stdlib.h>

#include "physics/charge_budget.h"
#include "physics/constants.h"

/* Common inputs of a recording, in this order; the first three are shared by all recordings. */
enum { GAP, VISCOSITY, SLIP, DENSITY, SCALE, VOLTAGE, TEMPERATURE, PRESSURE, DRIFT, INPUTS };

static const RfChargeLine LINE_OF[INPUTS] = {
    RF_CHARGE_LINE_GAP,         RF_CHARGE_LINE_VISCOSITY, RF_CHARGE_LINE_SLIP,
    RF_CHARGE_LINE_OIL_DENSITY, RF_CHARGE_LINE_SCALE,     RF_CHARGE_LINE_VOLTAGE,
    RF_CHARGE_LINE_TEMPERATURE, RF_CHARGE_LINE_PRESSURE,  RF_CHARGE_LINE_AIR_DRIFT,
};

static RfChargeInputs stated(void)
{
    return (RfChargeInputs){
        .plate_gap_m = {6.0e-3, 2.0e-5},
        .voltage_relative_u = 1e-3,
        .scale_relative_u = 4e-3,
        .gravity_m_s2 = {9.8106, 0.0},
        .oil = {.density_kg_m3 = {886.0, 3.0}},
        .temperature_kelvin = {296.15, 0.3},
        .pressure_pa = {101300.0, 100.0},
        .humidity = {0.45, 0.0},
        .viscosity_law = RF_VISCOSITY_ISO_15900,
        .slip_law = RF_SLIP_KIM_2005,
        .air_drift_u_m_s = 2e-8,
    };
}

/* z of each measurement; laws are wrong by anything between bounds, as the budget has it. */
static double draw_z(int input, gsl_rng *rng)
{
    return input == VISCOSITY || input == SLIP ? gsl_ran_flat(rng, -sqrt(3.0), sqrt(3.0))
                                               : gsl_ran_ugaussian(rng);
}

/* The medium as it is, where the sheet is off by z sigmas of `lines`. */
static RfMedium truth(const double *z, const RfBudgetInput *lines)
{
    RfChargeInputs is = stated();
    is.plate_gap_m.value += z[GAP] * is.plate_gap_m.sigma;
    is.oil.density_kg_m3.value += z[DENSITY] * is.oil.density_kg_m3.sigma;
    is.temperature_kelvin.value += z[TEMPERATURE] * is.temperature_kelvin.sigma;
    is.pressure_pa.value += z[PRESSURE] * is.pressure_pa.sigma;
    RfMedium medium = rf_charge_budget_medium(&is);
    medium.viscosity_pa_s *= 1.0 + z[VISCOSITY] * lines[RF_CHARGE_LINE_VISCOSITY].sigma;
    medium.slip.alpha *= 1.0 + z[SLIP] * lines[RF_CHARGE_LINE_SLIP].sigma;
    medium.slip.beta *= 1.0 + z[SLIP] * lines[RF_CHARGE_LINE_SLIP].sigma;
    return medium;
}

/* What comes out for a droplet of `multiple` units: seen in the stated scale and volts, worked out with the stated medium. */
static RfChargeEstimate measure(const RfMedium *is, const double *z, double shift, int multiple,
                                double sigma_units, gsl_rng *rng)
{
    const RfChargeInputs inputs = stated();
    const RfMedium medium = rf_charge_budget_medium(&inputs);
    const double radius_m = gsl_ran_flat(rng, 0.45e-6, 0.9e-6);
    const double scale = 1.0 + z[SCALE] * inputs.scale_relative_u + shift;
    const double volts = 1.0 + z[VOLTAGE] * inputs.voltage_relative_u;
    const double fall_m_s = rf_drag_settling_speed_m_s(is, radius_m) + z[DRIFT] * inputs.air_drift_u_m_s;
    const double charge_coulomb = multiple * RF_ELEMENTARY_CHARGE_COULOMB;
    const double slope = charge_coulomb * volts / (rf_drag_coefficient_kg_s(is, radius_m) * is->plate_gap_m);
    const double seen_m = rf_drag_radius_m(&medium, fall_m_s / scale);
    const double sigma_coulomb = sigma_units * RF_ELEMENTARY_CHARGE_COULOMB;
    const double seen_coulomb =
        rf_drag_coefficient_kg_s(&medium, seen_m) * medium.plate_gap_m * slope / scale;
    return (RfChargeEstimate){
        .radius_m = {seen_m, 0.0},
        .charge_coulomb = {seen_coulomb + gsl_ran_gaussian(rng, sigma_coulomb), sigma_coulomb}};
}

static int draw_multiple(const Benches *benches, gsl_rng *rng)
{
    const int multiple = 1 + (int)gsl_rng_uniform_int(rng, benches->largest_multiple);
    return gsl_rng_uniform(rng) < 0.5 ? -multiple : multiple;
}

static void fill_recording(const Benches *benches, const double *z, double shift,
                           RfPooledRecording *recording, gsl_rng *rng)
{
    const RfChargeInputs inputs = stated();
    const RfBudgetOptions first_order = {.coverage = 0.95};
    RfBudgetInput lines[RF_CHARGE_LINES];
    const RfChargeEstimate any = {.radius_m = {5e-7, 0.0},
                                  .charge_coulomb = {RF_ELEMENTARY_CHARGE_COULOMB, 1e-21}};
    rf_budget_free(rf_charge_budget_new(&inputs, &any, &first_order, lines, NULL));
    const RfMedium is = truth(z, lines);
    RfValue *charges = g_new(RfValue, benches->droplets);
    double *influences = g_new(double, benches->droplets *INPUTS);
    for (unsigned i = 0; i < benches->droplets; i++) {
        const double sigma_units = gsl_ran_flat(rng, benches->sigma_low, benches->sigma_high);
        const RfChargeEstimate seen = measure(&is, z, shift, draw_multiple(benches, rng), sigma_units, rng);
        g_autoptr(RfBudget) budget = rf_charge_budget_new(&inputs, &seen, &first_order, NULL, NULL);
        charges[i] = seen.charge_coulomb;
        for (int k = 0; k < INPUTS; k++) influences[i * INPUTS + k] = budget->parts[LINE_OF[k]].contribution;
    }
    recording->n = benches->droplets;
    recording->n_inputs = INPUTS;
    recording->charges_coulomb = charges;
    recording->influences_coulomb = influences;
}

/* Which measurement an input of recording r is: three for all, a bottle and a reticle for some, the rest its own. */
static size_t measurement_of(const Benches *benches, size_t r, int input)
{
    if (input < DENSITY) return (size_t)input;
    const size_t holder = input == DENSITY ? r / benches->bottle_of
                          : input == SCALE ? r / benches->reticle_of
                                           : r;
    return 3 + (size_t)(input - DENSITY) * benches->recordings + holder;
}

BenchPool *bench_pool_new(const Benches *benches, double shift, gsl_rng *rng)
{
    BenchPool *pool = g_new0(BenchPool, 1);
    pool->n = benches->recordings;
    pool->n_measurements = 3 + (INPUTS - 3) * benches->recordings;
    pool->recordings = g_new0(RfPooledRecording, pool->n);
    g_autofree double *z = g_new(double, pool->n_measurements);
    for (size_t k = 0; k < pool->n_measurements; k++) z[k] = draw_z(k < 3 ? (int)k : DENSITY, rng);
    for (size_t r = 0; r < pool->n; r++) {
        double own[INPUTS];
        size_t *measurements = g_new(size_t, INPUTS);
        for (int k = 0; k < INPUTS; k++) {
            measurements[k] = measurement_of(benches, r, k);
            own[k] = z[measurements[k]];
        }
        pool->recordings[r].measurements = measurements;
        fill_recording(benches, own, r == 0 ? shift : 0.0, &pool->recordings[r], rng);
    }
    return pool;
}

void bench_pool_free(BenchPool *pool)
{
    for (size_t r = 0; r < pool->n; r++) {
        g_free((void *)pool->recordings[r].charges_coulomb);
        g_free((void *)pool->recordings[r].influences_coulomb);
        g_free((void *)pool->recordings[r].measurements);
    }
    g_free(pool->recordings);
    g_free(pool);
}
