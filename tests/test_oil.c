#include "physics/oil.h"

#include <glib.h>
#include <math.h>

static void without_reference_temperature(void)
{
    const RfOil oil = {.density_kg_m3 = {886.0, 1.0}, .slope_kg_m3_per_kelvin = {-0.65, 0.05}};
    const RfValue rho = rf_oil_density_kg_m3(&oil, (RfValue){303.15, 0.2});
    g_assert_cmpfloat(rho.value, ==, 886.0);
    g_assert_cmpfloat(rho.sigma, ==, 1.0);
}

/* 886 at 20 degC, -0.65(5) per kelvin, read at 23.0(2): 884.05, and 1.0, 0.15, 0.13 in quadrature. */
static void slope_is_applied_with_its_sigma(void)
{
    const RfOil oil = {{886.0, 1.0}, 293.15, {-0.65, 0.05}};
    const RfValue rho = rf_oil_density_kg_m3(&oil, (RfValue){296.15, 0.2});
    g_assert_cmpfloat_with_epsilon(rho.value, 884.05, 1e-9);
    g_assert_cmpfloat_with_epsilon(rho.sigma, sqrt(1.0 + 0.15 * 0.15 + 0.13 * 0.13), 1e-9);
}

int main(int argc, char **argv)
{
    g_test_init(&argc, &argv, NULL);
    g_test_add_func("/oil/density/without-reference-temperature", without_reference_temperature);
    g_test_add_func("/oil/density/slope-is-applied-with-its-sigma", slope_is_applied_with_its_sigma);
    return g_test_run();
}
