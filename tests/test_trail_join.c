#include "physics/trail_join.h"

static RfSample at(double time_s, double fall_m, double drift_m)
{
    return (RfSample){time_s, fall_m, drift_m, 1e-7, 1e-7};
}

static void test_none(void)
{
    g_autoptr(RfJoinedTrails) joined = rf_trail_join(NULL, 0);
    g_assert_cmpuint(joined->n, ==, 0);
}

/* A droplet lost for two frames beside another that goes on; a third begins too far away, a fourth too late. */
static void test_end_to_nearby_start(void)
{
    RfSample a[] = {at(0, 0, 0), at(0.033, 2e-6, 0)}, b[] = {at(0.1, 6e-6, 1e-6), at(0.133, 4e-6, 1e-6)};
    RfSample other[] = {at(0, 0, 1e-4), at(0.133, 1e-5, 1e-4)}, far[] = {at(0.1, 5e-6, 4e-5)};
    RfSample late[] = {at(0.5, 4e-6, 1e-6)};
    RfTrail trails[] = {{1, 2, a}, {2, 2, other}, {3, 2, b}, {4, 1, far}, {5, 1, late}};
    g_autoptr(RfJoinedTrails) joined = rf_trail_join(trails, 5);
    g_assert_cmpuint(joined->n, ==, 4);
    g_assert_cmpuint(joined->trails[0].droplet, ==, 1);
    g_assert_cmpuint(joined->trails[0].n, ==, 4);
    g_assert_cmpfloat(joined->trails[0].samples[2].time_s, ==, 0.1);
    g_assert_cmpuint(joined->trails[1].n, ==, 2);
}

int main(int argc, char **argv)
{
    g_test_init(&argc, &argv, NULL);
    g_test_add_func("/trail-join/join/none", test_none);
    g_test_add_func("/trail-join/join/end-to-nearby-start", test_end_to_nearby_start);
    return g_test_run();
}
