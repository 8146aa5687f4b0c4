#include "physics/small_effects.h"

#include <glib.h>
#include <math.h>

#include "physics/drag.h"

static RfMedium room_air(void)
{
    RfMedium medium = {1.83245e-5, 0.0, {0, 0, 1}, 886.0, 1.187, 296.15, 9.80665, 6e-3};
    rf_drag_choose_slip(&medium, RF_SLIP_KIM_2005, 0.0, 101300.0);
    return medium;
}

/* The numbers that the header tells. */
static void stated_sizes(void)
{
    const RfMedium medium = room_air();
    g_assert_cmpfloat_with_epsilon(rf_small_effects_plate_drag(1e-6, 0.2e-3), 0.0056, 0.0001);
    g_assert_cmpfloat_with_epsilon(2.0 * rf_small_effects_plate_drag(1e-6, 3e-3), 0.00075, 0.00001);
    g_assert_cmpfloat(rf_small_effects_inertial_drag(&medium, 2e-6, -0.3e-3), <, 1e-4);
    g_assert_cmpfloat_with_epsilon(rf_small_effects_settling_time_s(&medium, 0.5e-6), 3.1e-6, 0.1e-6);
    g_assert_cmpfloat(rf_small_effects_image_charge(&medium, 0.5e-6, 10 * 1.602e-19, 0.2e-3), <, 4e-5);
}

/* m/k is also the settling speed over gravity, but for buoyancy. */
static void settling_time_is_speed_over_gravity(void)
{
    const RfMedium medium = room_air();
    const double lift = 886.0 / (886.0 - 1.187);
    const double expected = rf_drag_settling_speed_m_s(&medium, 0.8e-6) / 9.80665 * lift;
    g_assert_cmpfloat_with_epsilon(rf_small_effects_settling_time_s(&medium, 0.8e-6) / expected, 1.0, 1e-12);
}

static void vanish_far_and_slow(void)
{
    const RfMedium medium = room_air();
    g_assert_cmpfloat(rf_small_effects_inertial_drag(&medium, 1e-6, 0.0), ==, 0.0);
    g_assert_cmpfloat(rf_small_effects_plate_drag(1e-6, 1e3), <, 1e-8);
    g_assert_cmpfloat(rf_small_effects_image_charge(&medium, 1e-6, 0.0, 1e-3), ==, 0.0);
}

int main(int argc, char **argv)
{
    g_test_init(&argc, &argv, NULL);
    g_test_add_func("/small_effects/sizes/as-stated", stated_sizes);
    g_test_add_func("/small_effects/settling-time/is-speed-over-gravity",
                    settling_time_is_speed_over_gravity);
    g_test_add_func("/small_effects/limits/vanish-far-and-slow", vanish_far_and_slow);
    return g_test_run();
}
