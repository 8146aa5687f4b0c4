#include "calib/thermistor.h"

#include <gsl/gsl_errno.h>
#include <math.h>

/* Data-sheet coefficients of a generic 10 kohm NTC ("Thermistor Resistance vs Temperature Chart"; law: Steinhart and
 * Hart, Deep-Sea Research 15 (1968) 497) and of the four-term form (sensor resistance-curve guide, 2014, material 1). */
static const RfThermistor steinhart_hart = {.law = RF_THERMISTOR_STEINHART_HART,
                                            .coefficient_per_kelvin = {1.12924e-3, 2.34108e-4, 0.87755e-7}};
static const RfThermistor four_term = {
    .law = RF_THERMISTOR_FOUR_TERM,
    .coefficient_per_kelvin = {3.3539438e-3, 2.5646095e-4, 2.5158166e-6, 1.0503069e-7},
    .reference_ohm = 10000.0};

static double celsius(const RfThermistor *thermistor, double ohm)
{
    RfValue kelvin;
    g_autoptr(GError) error = NULL;
    rf_thermistor_kelvin(thermistor, (RfValue){ohm, 0.0}, &kelvin, &error);
    g_assert_no_error(error);
    return kelvin.value - 273.15;
}

/* R(T) as printed in an instrument manual's appendix (-10..0 degC), a service table (30..65 degC) and the guide
 * above; the columns computed from the coefficients go with them, rounded to 1 mK. */
static const struct {
    double t_celsius, ohm, steinhart_hart_celsius, four_term_celsius;
} points[] = {
    {-10, 55303.9, -10.001, -10.023}, {0, 32650.9, -0.001, -0.009}, {20, 12490, 20.006, 20.011},
    {25, 10000, 25.000, 25.006},      {30, 8057, 29.997, 30.004},   {55, 2986, 54.992, 54.992},
    {65, 2083, 64.991, 64.985},       {5, 25390, 5.003, 5.001},     {40, 5325, 40.000, 40.005},
    {50, 3601, 50.001, 50.003},
};

static void published_points(void)
{
    for (size_t i = 0; i < G_N_ELEMENTS(points); i++) {
        g_assert_cmpfloat_with_epsilon(celsius(&steinhart_hart, points[i].ohm), points[i].t_celsius, 0.02);
        g_assert_cmpfloat_with_epsilon(celsius(&steinhart_hart, points[i].ohm),
                                       points[i].steinhart_hart_celsius, 6e-4);
        g_assert_cmpfloat_with_epsilon(celsius(&four_term, points[i].ohm), points[i].four_term_celsius, 6e-4);
    }
}

static void table_between_its_points(void)
{
    static const double ohm[] = {32640, 19900, 12490, 10000, 8056, 5325},
                        kelvin[] = {273.15, 283.15, 293.15, 298.15, 303.15, 313.15};
    RfThermistor table = {
        .law = RF_THERMISTOR_TABLE, .n = 6, .resistance_ohm = ohm, .temperature_kelvin = kelvin};
    for (size_t i = 0; i < table.n; i++)
        g_assert_cmpfloat_with_epsilon(celsius(&table, ohm[i]), kelvin[i] - 273.15, 1e-9);
    /* points of the same guide that the table above leaves out; 1/T is nearly straight in ln R */
    g_assert_cmpfloat_with_epsilon(celsius(&table, 25390), 5.0, 0.03);
    g_assert_cmpfloat_with_epsilon(celsius(&table, 15710), 15.0, 0.03);
    g_assert_cmpfloat_with_epsilon(celsius(&table, 6530), 35.0, 0.03);
    RfThermistor pair = {
        .law = RF_THERMISTOR_TABLE, .n = 2, .resistance_ohm = ohm + 3, .temperature_kelvin = kelvin + 3};
    g_assert_cmpfloat_with_epsilon(celsius(&pair, 9000), celsius(&steinhart_hart, 9000), 0.02);
}

static void sigma_follows_the_slope(void)
{
    RfThermistor laws[] = {steinhart_hart, four_term};
    for (size_t i = 0; i < G_N_ELEMENTS(laws); i++) {
        RfValue kelvin;
        double step_ohm = 1.0;
        double slope =
            (celsius(&laws[i], 10000 + step_ohm) - celsius(&laws[i], 10000 - step_ohm)) / (2 * step_ohm);
        g_assert_true(rf_thermistor_kelvin(&laws[i], (RfValue){10000, 50}, &kelvin, NULL));
        g_assert_cmpfloat_with_epsilon(kelvin.sigma, fabs(slope) * 50, 1e-6);
        laws[i].u_law_kelvin = 0.3;
        RfValue wider;
        g_assert_true(rf_thermistor_kelvin(&laws[i], (RfValue){10000, 50}, &wider, NULL));
        g_assert_cmpfloat_with_epsilon(wider.sigma, hypot(kelvin.sigma, 0.3), 1e-12);
    }
}

static void refuse(RfThermistor thermistor, double ohm, int code)
{
    RfValue kelvin;
    g_autoptr(GError) error = NULL;
    g_assert_false(rf_thermistor_kelvin(&thermistor, (RfValue){ohm, 0.0}, &kelvin, &error));
    g_assert_error(error, RF_THERMISTOR_ERROR, code);
}

static void refusals(void)
{
    static const double ohm[] = {32640, 19900, 12490}, kelvin[] = {273.15, 283.15, 293.15},
                        rising[] = {273.15, 263.15, 253.15}, with_zero[] = {32640, 0, 12490};
    RfThermistor table = {
        .law = RF_THERMISTOR_TABLE, .n = 3, .resistance_ohm = ohm, .temperature_kelvin = kelvin};
    refuse(steinhart_hart, 0.0, RF_THERMISTOR_ERROR_RANGE);
    refuse(steinhart_hart, -5.0, RF_THERMISTOR_ERROR_RANGE);
    refuse(steinhart_hart, 1e-6, RF_THERMISTOR_ERROR_RANGE);
    refuse(steinhart_hart, 1e30, RF_THERMISTOR_ERROR_RANGE);
    refuse(table, 40000, RF_THERMISTOR_ERROR_RANGE);
    refuse(table, 12000, RF_THERMISTOR_ERROR_RANGE);
    table.temperature_kelvin = rising;
    refuse(table, 20000, RF_THERMISTOR_ERROR_TABLE);
    table.temperature_kelvin = kelvin;
    table.resistance_ohm = with_zero;
    refuse(table, 20000, RF_THERMISTOR_ERROR_TABLE);
    table.n = 1;
    refuse(table, 20000, RF_THERMISTOR_ERROR_TABLE);
}

int main(int argc, char **argv)
{
    gsl_set_error_handler_off();
    g_test_init(&argc, &argv, NULL);
    g_test_add_func("/thermistor/kelvin/published-points", published_points);
    g_test_add_func("/thermistor/kelvin/table-between-its-points", table_between_its_points);
    g_test_add_func("/thermistor/kelvin/sigma-follows-the-slope", sigma_follows_the_slope);
    g_test_add_func("/thermistor/kelvin/refusals", refusals);
    return g_test_run();
}
