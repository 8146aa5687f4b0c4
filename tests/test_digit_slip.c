#include "cli/digit_slip.h"

#include <math.h>

static double weight_of(const char *text, double scale, double meant_s)
{
    g_autoptr(GArray) slips = g_array_new(FALSE, FALSE, sizeof(RfDigitSlip));
    rf_digit_slip_find(text, scale, 0.05, slips);
    double weight = 0;
    for (guint i = 0; i < slips->len; i++) {
        const RfDigitSlip *slip = &g_array_index(slips, RfDigitSlip, i);
        if (fabs(slip->time_s - meant_s) < 1e-9) weight = fmax(weight, slip->weight);
    }
    return weight;
}

static void exchanged_digits(void)
{
    g_assert_cmpfloat_with_epsilon(weight_of("8.35", 1, 3.85), 1, 1e-12); /* across the point */
    g_assert_cmpfloat_with_epsilon(weight_of("3.58", 1, 3.85), 1, 1e-12);
    g_assert_cmpfloat_with_epsilon(weight_of("21.4", 1, 12.4), 1, 1e-12);
    g_assert_cmpfloat_with_epsilon(weight_of("8,35", 1, 3.85), 1, 1e-12); /* decimal comma */
    g_assert_cmpfloat(weight_of("8.35", 1, 5.38), <=, 0);                 /* not neighbours */
}

static void digits_alike(void)
{
    g_assert_cmpfloat(weight_of("7.87", 1, 1.87), >, 0);
    g_assert_cmpfloat(weight_of("6.26", 1, 5.26), >, 0);
    g_assert_cmpfloat(weight_of("7.04", 1, 2.04), >, 0);
    g_assert_cmpfloat(weight_of("7.04", 1, 4.04), <=, 0); /* 4 is not like 7 */
}

static void point_one_place_off(void)
{
    g_assert_cmpfloat(weight_of("38.5", 1, 3.85), >, 0);
    g_assert_cmpfloat(weight_of("0.385", 1, 3.85), >, 0);
    g_assert_cmpfloat(weight_of("3850", 1e-3, 38.5), >, 0); /* milliseconds */
}

static void nothing_from_what_is_no_number(void)
{
    g_autoptr(GArray) slips = g_array_new(FALSE, FALSE, sizeof(RfDigitSlip));
    rf_digit_slip_find("1:23.4", 0, 0.05, slips);
    rf_digit_slip_find("1:23.4", 1, 0.05, slips);
    rf_digit_slip_find("about 3", 1, 0.05, slips);
    rf_digit_slip_find("", 1, 0.05, slips);
    rf_digit_slip_find("3.8512345678901234567890123", 1, 0.05, slips);
    g_assert_cmpuint(slips->len, ==, 0);
}

static void small_changes_are_left_out(void)
{
    g_autoptr(GArray) slips = g_array_new(FALSE, FALSE, sizeof(RfDigitSlip));
    rf_digit_slip_find("2.49", 1, 0.2, slips);
    for (guint i = 0; i < slips->len; i++)
        g_assert_cmpfloat(fabs(g_array_index(slips, RfDigitSlip, i).time_s - 2.49), >, 0.2);
    g_assert_cmpuint(slips->len, >, 0);
}

int main(int argc, char **argv)
{
    g_test_init(&argc, &argv, NULL);
    g_test_add_func("/digit_slip/find/exchanged-digits", exchanged_digits);
    g_test_add_func("/digit_slip/find/digits-alike", digits_alike);
    g_test_add_func("/digit_slip/find/point-one-place-off", point_one_place_off);
    g_test_add_func("/digit_slip/find/nothing-from-what-is-no-number", nothing_from_what_is_no_number);
    g_test_add_func("/digit_slip/find/small-changes-are-left-out", small_changes_are_left_out);
    return g_test_run();
}
