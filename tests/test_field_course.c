#include "tracker/field_course.h"

#include <glib.h>

static const RfFieldChange changes[] = {{0, 0}, {2, 1}, {3, -1}, {5, 0}};
static const RfFieldCourse course = {changes, G_N_ELEMENTS(changes)};

static void test_unknown(void)
{
    const RfFieldCourse none = {NULL, 0};
    g_assert_false(rf_field_course_is_known(NULL));
    g_assert_false(rf_field_course_is_known(&none));
    g_assert_cmpint(rf_field_course_state(NULL, 1), ==, 0);
    g_assert_cmpfloat(rf_field_course_integral_s(&none, 0, 9), ==, 0);
}

static void test_state(void)
{
    g_assert_cmpint(rf_field_course_state(&course, -1), ==, 0);
    g_assert_cmpint(rf_field_course_state(&course, 2), ==, 1);
    g_assert_cmpint(rf_field_course_state(&course, 4.999), ==, -1);
    g_assert_cmpint(rf_field_course_state(&course, 99), ==, 0);
}

static void test_integral(void)
{
    g_assert_cmpfloat_with_epsilon(rf_field_course_integral_s(&course, 0, 10), 1 - 2, 1e-12);
    g_assert_cmpfloat_with_epsilon(rf_field_course_integral_s(&course, 1.9, 2.1), 0.1, 1e-12);
    g_assert_cmpfloat_with_epsilon(rf_field_course_integral_s(&course, 2.9, 3.1), 0, 1e-12);
    g_assert_cmpfloat_with_epsilon(rf_field_course_integral_s(&course, 2.9, 3.3), 0.1 - 0.3, 1e-12);
    g_assert_cmpfloat(rf_field_course_integral_s(&course, 2.5, 2.5), ==, 0);
}

static void test_reversed(void)
{
    for (double from_s = -1; from_s < 6; from_s += 0.37)
        for (double to_s = -1; to_s < 6; to_s += 0.41)
            g_assert_cmpfloat_with_epsilon(rf_field_course_integral_s(&course, from_s, to_s),
                                           -rf_field_course_integral_s(&course, to_s, from_s), 1e-12);
}

int main(int argc, char **argv)
{
    g_test_init(&argc, &argv, NULL);
    g_test_add_func("/field_course/unknown-is-off", test_unknown);
    g_test_add_func("/field_course/state", test_state);
    g_test_add_func("/field_course/integral", test_integral);
    g_test_add_func("/field_course/integral/reversed", test_reversed);
    return g_test_run();
}
