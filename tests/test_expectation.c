#include "physics/expectation.h"

#include <glib.h>
#include <gsl/gsl_errno.h>
#include <gsl/gsl_linalg.h>
#include <math.h>

#include "physics/drag.h"

static const double E = 1.602176634e-19;

static RfMedium room_air(void)
{
    RfMedium medium = {1.83245e-5, 0.0, {0, 0, 1}, 886.0, 1.187, 296.15, 9.80665, 6e-3};
    rf_drag_choose_slip(&medium, RF_SLIP_KIM_2005, 0.0, 101300.0);
    return medium;
}

static RfObservation watch(void)
{
    return (RfObservation){20.0, 20.0, 500.0, 30.0, 0.5e-6, 0.0, 2e-3};
}

/* Without localisation noise the bound on a velocity is sqrt(2 D/T), for a Brownian path with drift (elementary). */
static void velocity_bound_without_noise(void)
{
    const RfMedium medium = room_air();
    RfObservation quiet = watch();
    quiet.localisation_m = 1e-12;
    const RfExpectation expected = rf_expectation_find(&medium, &quiet, 0.5e-6, 3.0 * E);
    const double bound = sqrt(2.0 * expected.diffusion_m2_s / 20.0);
    g_assert_cmpfloat_with_epsilon(expected.u_fall_off_m_s / bound, 1.0, 1e-6);
}

/* Without diffusion (a very large droplet) it is that of a straight line through N + 1 positions, s sqrt(12/n^3)/dt
 * (elementary, n >> 1). */
static void velocity_bound_without_diffusion(void)
{
    RfMedium medium = room_air();
    medium.temperature_kelvin = 1e-9;
    const RfExpectation expected =
        rf_expectation_find(&medium, &(RfObservation){20, 20, 500, 30, 0.5e-6, 0.0, 2e-3}, 2e-6, E);
    const double n = 601.0;
    g_assert_cmpfloat_with_epsilon(expected.u_fall_off_m_s / (0.5e-6 * sqrt(12.0 / (n * n * n)) * 30.0), 1.0,
                                   1e-3);
}

/* The closed sum over modes against the tridiagonal system solved as it stands. */
static void velocity_bound_is_the_matrix_one(void)
{
    const RfMedium medium = room_air();
    const RfObservation w = watch();
    const RfExpectation expected = rf_expectation_find(&medium, &w, 0.4e-6, 2.0 * E);
    enum { N = 600 };
    gsl_vector *diagonal = gsl_vector_alloc(N), *beside = gsl_vector_alloc(N - 1);
    gsl_vector *ones = gsl_vector_alloc(N), *solution = gsl_vector_alloc(N);
    const double noise = 0.25e-12;
    gsl_vector_set_all(diagonal, 2.0 * expected.diffusion_m2_s / 30.0 + 2.0 * noise);
    gsl_vector_set_all(beside, -noise);
    gsl_vector_set_all(ones, 1.0 / 30.0);
    gsl_linalg_solve_symm_tridiag(diagonal, beside, ones, solution);
    double information = 0.0;
    for (int i = 0; i < N; i++) information += gsl_vector_get(solution, i) / 30.0;
    g_assert_cmpfloat_with_epsilon(expected.u_fall_off_m_s * sqrt(information), 1.0, 1e-9);
    gsl_vector_free(diagonal);
    gsl_vector_free(beside);
    gsl_vector_free(ones);
    gsl_vector_free(solution);
}

/* Bounds computed apart from this program for q = 3 e, 20 s off and 20 s on, 500 V over 6 mm, s = 0.5 um unknown, 30
 * frames/s, in e: radius 0.3 um 0.37 and 0.13; 0.5 um 0.083 and 0.070; 1 um 0.029 both. */
static void bounds_on_charge(void)
{
    static const double rows[][3] = {{0.3e-6, 0.37, 0.13}, {0.5e-6, 0.083, 0.070}, {1.0e-6, 0.029, 0.029}};
    static const double half_digit[][2] = {{0.005, 0.005}, {0.0005, 0.0005}, {0.0005, 0.0005}};
    const RfMedium medium = room_air();
    RfObservation w = watch();
    w.blur = 1.0 / 6.0;
    for (size_t i = 0; i < G_N_ELEMENTS(rows); i++) {
        const RfExpectation a = rf_expectation_find(&medium, &w, rows[i][0], 3.0 * E);
        const RfExpectation b = rf_expectation_find(&medium, &w, rows[i][0], -3.0 * E);
        g_test_message("%.1f um: fall %.4f e (%.4f), joint %.4f e (%.4f), spread share %.2f",
                       1e6 * rows[i][0], a.u_charge_fall_coulomb / E, b.u_charge_fall_coulomb / E,
                       a.u_charge_joint_coulomb / E, b.u_charge_joint_coulomb / E, a.spread_share);
        g_assert_cmpfloat_with_epsilon(a.u_charge_fall_coulomb / E, rows[i][1], half_digit[i][0]);
        g_assert_cmpfloat_with_epsilon(a.u_charge_joint_coulomb / E, rows[i][2], half_digit[i][1]);
    }
}

/* Below about 0.45 um the spread carries more of the radius than the fall, above it less. */
static void spread_rules_small_droplets(void)
{
    const RfMedium medium = room_air();
    const RfObservation w = watch();
    g_assert_cmpfloat(rf_expectation_find(&medium, &w, 0.35e-6, 3.0 * E).spread_share, >, 0.5);
    g_assert_cmpfloat(rf_expectation_find(&medium, &w, 0.6e-6, 3.0 * E).spread_share, <, 0.5);
    double before = 1.0;
    for (double a = 0.2e-6; a < 2e-6; a *= 1.2) {
        const double share = rf_expectation_find(&medium, &w, a, 3.0 * E).spread_share;
        g_assert_cmpfloat(share, <, before);
        g_assert_cmpfloat(share, >, 0.0);
        before = share;
    }
}

static void longer_is_better(void)
{
    const RfMedium medium = room_air();
    RfObservation w = watch();
    const RfExpectation once = rf_expectation_find(&medium, &w, 0.5e-6, 3.0 * E);
    w.off_s *= 4.0;
    w.on_s *= 4.0;
    const RfExpectation longer = rf_expectation_find(&medium, &w, 0.5e-6, 3.0 * E);
    g_assert_cmpfloat_with_epsilon(longer.u_charge_joint_coulomb / once.u_charge_joint_coulomb, 0.5, 0.005);
}

static void balance_voltage_stops_the_droplet(void)
{
    const RfMedium medium = room_air();
    RfObservation w = watch();
    w.voltage_V = rf_expectation_balance_voltage_V(&medium, 0.7e-6, 4.0 * E);
    const RfExpectation still = rf_expectation_find(&medium, &w, 0.7e-6, 4.0 * E);
    g_assert_cmpfloat(w.voltage_V, <, 0.0);
    g_assert_cmpfloat(fabs(still.fall_on_m_s), <, 1e-12 * still.fall_off_m_s);
    g_assert_cmpfloat_with_epsilon(still.in_view_on_s, 1e6, 1.0);
    g_assert_cmpfloat_with_epsilon(still.in_view_off_s, 2e-3 / still.fall_off_m_s, 1e-6);
}

int main(int argc, char **argv)
{
    gsl_set_error_handler_off();
    g_test_init(&argc, &argv, NULL);
    g_test_add_func("/expectation/limits/without-noise", velocity_bound_without_noise);
    g_test_add_func("/expectation/limits/without-diffusion", velocity_bound_without_diffusion);
    g_test_add_func("/expectation/bound/is-the-matrix-one", velocity_bound_is_the_matrix_one);
    g_test_add_func("/expectation/bound/on-charge", bounds_on_charge);
    g_test_add_func("/expectation/bound/spread-rules-small-droplets", spread_rules_small_droplets);
    g_test_add_func("/expectation/bound/longer-is-better", longer_is_better);
    g_test_add_func("/expectation/balance/stops-the-droplet", balance_voltage_stops_the_droplet);
    return g_test_run();
}
