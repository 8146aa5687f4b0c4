#include "physics/local_gravity.h"

#include <glib.h>
#include <math.h>

#include "physics/physics_error.h"

/* WGS84: equator and pole as published (9.7803253359, 9.8321849378; "International Gravity Formula"), the rest by
 * separate arithmetic from the same constants. */
static void normal_wgs84(void)
{
    static const double rows[][2] = {{0, 9.7803253359},  {15, 9.7837849624}, {30, 9.7932472692},
                                     {40, 9.8016968628}, {45, 9.8061977694}, {50, 9.8107021356},
                                     {60, 9.8191769531}, {75, 9.8286966275}, {90, 9.8321849379}};
    for (size_t i = 0; i < G_N_ELEMENTS(rows); i++)
        g_assert_cmpfloat_with_epsilon(rf_local_gravity_normal_m_s2(rows[i][0]), rows[i][1], 0.6e-10);
    g_assert_cmpfloat_with_epsilon(rf_local_gravity_normal_m_s2(90.0), 9.8321849378, 1.5e-10);
}

/* GRS80 check values 9.780326772, 9.806199203, 9.832186368 (public oceanography routine): 1.4e-6 above WGS84. */
static void normal_near_grs80(void)
{
    static const double rows[][2] = {{0, 9.780326772}, {45, 9.806199203}, {90, 9.832186368}};
    for (size_t i = 0; i < G_N_ELEMENTS(rows); i++)
        g_assert_cmpfloat_with_epsilon(rows[i][1] - rf_local_gravity_normal_m_s2(rows[i][0]), 1.4e-6, 0.1e-6);
}

/* Decrease with height in mGal (1e-5 m/s^2) as the SEG's encyclopedic dictionary gives it,
 * (0.308768 - 0.000440 sin^2 lat - 1.442e-7 h) h: to agree within 0.4 mGal up to 2 km; second-order WGS84 values by
 * separate arithmetic. */
static void free_air_decrease(void)
{
    static const double rows[][3] = {
        {0, 100, 9.780016574},  {0, 500, 9.778781671},  {0, 1000, 9.777238367},  {0, 2000, 9.774152840},
        {45, 100, 9.805889222}, {45, 500, 9.804655176}, {45, 1000, 9.803112944}, {45, 2000, 9.800029564},
        {90, 100, 9.831876606}, {90, 500, 9.830643425}, {90, 1000, 9.829102274}, {90, 2000, 9.826021060}};
    for (size_t i = 0; i < G_N_ELEMENTS(rows); i++) {
        const double lat = rows[i][0], h = rows[i][1];
        const double g = rf_local_gravity_at_height_m_s2(lat, h);
        g_assert_cmpfloat_with_epsilon(g, rows[i][2], 1e-9);
        const double s = sin(lat * G_PI / 180.0);
        const double seg_mgal = (0.308768 - 0.000440 * s * s - 1.442e-7 * h) * h;
        g_assert_cmpfloat_with_epsilon((rf_local_gravity_normal_m_s2(lat) - g) * 1e5, seg_mgal, 0.4);
    }
}

static void hemispheres_alike(void)
{
    g_assert_cmpfloat(rf_local_gravity_normal_m_s2(-52.0), ==, rf_local_gravity_normal_m_s2(52.0));
}

/* What is taken when nothing is known covers every latitude from the sea to 3 km. */
static void unknown_covers_the_earth(void)
{
    const RfValue unknown = rf_local_gravity_unknown();
    g_assert_cmpfloat(unknown.value, ==, 9.80665);
    for (double lat = 0.0; lat <= 90.0; lat += 5.0)
        for (double h = 0.0; h <= 3000.0; h += 500.0)
            g_assert_cmpfloat(fabs(rf_local_gravity_at_height_m_s2(lat, h) - unknown.value), <=,
                              sqrt(3.0) * unknown.sigma + 1e-3);
}

static void refuses_impossible_places(void)
{
    RfValue g = {0, 0};
    g_autoptr(GError) error = NULL;
    g_assert_true(rf_local_gravity_estimate(52.3, 75.0, &g, &error));
    g_assert_no_error(error);
    g_assert_cmpfloat(g.sigma, >, 0.0);
    g_assert_false(rf_local_gravity_estimate(91.0, 0.0, &g, &error));
    g_assert_error(error, RF_PHYSICS_ERROR, RF_PHYSICS_ERROR_RANGE);
    g_clear_error(&error);
    g_assert_false(rf_local_gravity_estimate(10.0, 35000.0, &g, &error));
    g_assert_error(error, RF_PHYSICS_ERROR, RF_PHYSICS_ERROR_RANGE);
    g_clear_error(&error);
    g_assert_false(rf_local_gravity_estimate((double)NAN, 0.0, &g, &error));
    g_assert_error(error, RF_PHYSICS_ERROR, RF_PHYSICS_ERROR_RANGE);
}

int main(int argc, char **argv)
{
    g_test_init(&argc, &argv, NULL);
    g_test_add_func("/local_gravity/normal/wgs84", normal_wgs84);
    g_test_add_func("/local_gravity/normal/near-grs80", normal_near_grs80);
    g_test_add_func("/local_gravity/normal/hemispheres-alike", hemispheres_alike);
    g_test_add_func("/local_gravity/at-height/free-air-decrease", free_air_decrease);
    g_test_add_func("/local_gravity/unknown/covers-the-earth", unknown_covers_the_earth);
    g_test_add_func("/local_gravity/estimate/refuses-impossible-places", refuses_impossible_places);
    return g_test_run();
}
