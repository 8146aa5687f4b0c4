#include "calib/quantity.h"

#include <gsl/gsl_errno.h>
#include <math.h>

static void check(const char *text, const char *unit, double value, double sigma)
{
    RfValue got = {-1.0, -1.0};
    g_autoptr(GError) error = NULL;
    g_test_message("%s in %s", text, unit);
    bool is_read = rf_quantity_parse(text, unit, &got, &error);
    g_assert_no_error(error);
    g_assert_true(is_read);
    g_assert_cmpfloat_with_epsilon(got.value, value, 1e-13 * fabs(value) + 1e-300);
    g_assert_cmpfloat_with_epsilon(got.sigma, sigma, 1e-12 * sigma + 1e-300);
}

static void exact_without_parentheses(void)
{
    check("6.000 mm", "m", 6.000e-3, 0.0);
    check("  -3 V ", "V", -3.0, 0.0);
    check("0.5", "1", 0.5, 0.0);
    check(".5 s", "s", 0.5, 0.0);
    check("5. s", "s", 5.0, 0.0);
}

/* Concise notation, JCGM 100:2008 7.2.2. */
static void published_numbers(void)
{
    static const struct {
        const char *text;
        double value, sigma;
    } cases[] = {
        {"12.345(67)", 12.345, 0.067},                                /* the notation's definition */
        {"1.6021766208(98)e-19", 1.6021766208e-19, 0.0000000098e-19}, /* CODATA 2014 */
        {"1.60217733(49)e-19", 1.60217733e-19,
         0.00000049e-19},                      /* Pang, Introduction to Computational Physics, p. 28 */
        {"100.02147(35)", 100.02147, 0.00035}, /* GUM 7.2.2; from memory, unverified */
        {"0.1368(18)", 0.1368, 0.0018},        /* GUM H.4 rewritten */
        {"652.60(6.42)", 652.60, 6.42},        /* a point inside: its own unit */
        {"4.774(9)", 4.774, 0.009},            /* Millikan 1913, via a laboratory report */
        {"1234(56)", 1234.0, 56.0},            /* the notation's definition */
        {"0.00218(67)", 0.00218, 0.00067},     /* GUM H.3 slope; from memory, unverified */
    };
    for (size_t i = 0; i < G_N_ELEMENTS(cases); i++) {
        RfValue got;
        g_autoptr(GError) error = NULL;
        g_test_message("%s", cases[i].text);
        g_assert_true(rf_quantity_parse_number(cases[i].text, &got, &error));
        g_assert_cmpfloat(got.value, ==, cases[i].value);
        g_assert_cmpfloat_with_epsilon(got.sigma, cases[i].sigma, 1e-14 * cases[i].sigma);
    }
}

/* Factors by definition: inch 25.4 mm, conventional mmHg 133.322387415 Pa (NIST SP 811), g/cm3 = 1000 kg/m3. */
static void units_of_the_sheet(void)
{
    check("6.000(10) mm", "m", 6.000e-3, 0.010e-3);
    check("0.236(1) in", "m", 0.236 * 0.0254, 0.001 * 0.0254);
    check("1013.0(5) hPa", "Pa", 101300.0, 50.0);
    check("101.30(5) kPa", "Pa", 101300.0, 50.0);
    check("0.886(1) g/cm^3", "kg m-3", 886.0, 1.0);
    check("886.0(10) kg/m^3", "kg m-3", 886.0, 1.0);
    check("-0.65(5) kg/m^3/K", "kg m-3 K-1", -0.65, 0.05);
    check("45(5) %", "1", 0.45, 0.05);
    check("9.8106(5) m/s^2", "m s-2", 9.8106, 0.0005);
    check("30.000(1) Hz", "Hz", 30.0, 0.001);
    check("250 us", "s", 250e-6, 0.0);
    check("1.5 min", "s", 90.0, 0.0);
    check("10.00(1) kohm", "ohm", 10000.0, 10.0);
    check("52.5 degree", "rad", 52.5 * M_PI / 180.0, 0.0);
    check("100.0(3) \xc2\xb5m", "m", 100e-6, 0.3e-6);
    check("\xe2\x88\x92"
          "4.0(2) V",
          "V", -4.0, 0.2);
    RfValue mercury;
    g_assert_true(rf_quantity_parse("760 mmHg", "Pa", &mercury, NULL));
    g_assert_cmpfloat_with_epsilon(mercury.value, 101325.0, 0.02);
}

static void sigma_of_a_celsius_temperature_has_no_offset(void)
{
    check("23.0(2) degC", "K", 296.15, 0.2);
    check("23.0(2) \xc2\xb0"
          "C",
          "K", 296.15, 0.2);
    check("73.4(9) degF", "K", 296.15, 0.5);
    check("296.15(20) K", "K", 296.15, 0.2);
}

static void refuse(const char *text, const char *unit, int code, const char *needle)
{
    RfValue got = {7.0, 7.0};
    g_autoptr(GError) error = NULL;
    g_test_message("%s", text);
    g_assert_false(rf_quantity_parse(text, unit, &got, &error));
    g_assert_error(error, RF_QUANTITY_ERROR, code);
    g_test_message("-> %s", error->message);
    g_assert_nonnull(strstr(error->message, needle));
    g_assert_cmpfloat(got.value, ==, 7.0);
}

static void refusals_say_what_would_do(void)
{
    refuse("", "m", RF_QUANTITY_ERROR_NUMBER, "6.000(10)");
    refuse("mm", "m", RF_QUANTITY_ERROR_NUMBER, "seen `mm`");
    refuse("6.000(10)", "m", RF_QUANTITY_ERROR_UNIT, "without a unit");
    refuse("6,0 mm", "m", RF_QUANTITY_ERROR_NUMBER, "decimal point");
    refuse("6.0() mm", "m", RF_QUANTITY_ERROR_NUMBER, "6.000(10)");
    refuse("6.0(1 mm", "m", RF_QUANTITY_ERROR_NUMBER, "6.000(10)");
    refuse("6.0.1 mm", "m", RF_QUANTITY_ERROR_NUMBER, "6.000(10)");
    refuse("6.0(-1) mm", "m", RF_QUANTITY_ERROR_NUMBER, "6.000(10)");
    refuse("6.0 +- 0.1 mm", "m", RF_QUANTITY_ERROR_NUMBER, "form for");
    refuse("6.0 \xc2\xb1 0.1 mm", "m", RF_QUANTITY_ERROR_NUMBER, "form for");
    refuse("nan mm", "m", RF_QUANTITY_ERROR_NUMBER, "finite");
    refuse("inf mm", "m", RF_QUANTITY_ERROR_NUMBER, "finite");
    refuse("1e999 mm", "m", RF_QUANTITY_ERROR_NUMBER, "too large");
    refuse("1e308 km", "mm", RF_QUANTITY_ERROR_NUMBER, "too large");
    refuse("6 2 mm", "m", RF_QUANTITY_ERROR_UNIT, "where a unit was needed");
    refuse("6 furlongz", "m", RF_QUANTITY_ERROR_UNIT, "unknown");
    refuse("6 kg", "m", RF_QUANTITY_ERROR_DIMENSION, "another dimension");
    refuse("45 mm", "1", RF_QUANTITY_ERROR_DIMENSION, "another dimension");
    refuse("6 mm # gap", "m", RF_QUANTITY_ERROR_UNIT, "unknown");
    refuse("3 lg(re 1 mW)", "W", RF_QUANTITY_ERROR_UNIT, "proportional");
    refuse("0x10 mm", "m", RF_QUANTITY_ERROR_UNIT, "unknown");
}

static void check_text(double value, double sigma, const char *unit, const char *text)
{
    g_autofree char *got = rf_quantity_format((RfValue){value, sigma}, unit);
    g_assert_cmpstr(got, ==, text);
}

static void text_for_people(void)
{
    check_text(6.0, 0.010, "mm", "6.000(10) mm");
    check_text(6.0, 0.0, "mm", "6 mm");
    check_text(0.1, 0.0, NULL, "0.1");
    check_text(1.602176634e-19, 3.2e-22, "C", "1.6022(32)e-19 C");
    check_text(-1.602e-19, 1.2e-21, "C", "-1.602(12)e-19 C");
    check_text(12.345, 0.0996, "", "12.35(10)");
    check_text(9.9999, 0.00996, "", "10.000(10)");
    check_text(1234.4, 56.0, "V", "1234(56) V");
    check_text(1234.0, 560.0, "V", "1230(560) V");
    check_text(0.0, 0.2, "m", "0.00(20) m");
    check_text(0.0, 3e-21, "C", "0.0(30)e-21 C");
    check_text(296.15, 0.2, "K", "296.15(20) K");
}

static void text_reads_back(void)
{
    for (int power = -24; power < 9; power++) {
        RfValue value = {3.14159 * pow(10.0, power), 0.0271 * pow(10.0, power)}, back;
        g_autofree char *text = rf_quantity_format(value, "m");
        g_assert_true(rf_quantity_parse(text, "m", &back, NULL));
        g_assert_cmpfloat_with_epsilon(back.value, value.value, 0.1 * value.sigma);
        g_assert_cmpfloat_with_epsilon(back.sigma, value.sigma, 0.05 * value.sigma);
    }
}

int main(int argc, char **argv)
{
    gsl_set_error_handler_off();
    g_test_init(&argc, &argv, NULL);
    g_test_add_func("/quantity/parse/exact-without-parentheses", exact_without_parentheses);
    g_test_add_func("/quantity/parse/published-numbers", published_numbers);
    g_test_add_func("/quantity/parse/units-of-the-sheet", units_of_the_sheet);
    g_test_add_func("/quantity/parse/sigma-in-celsius-has-no-offset",
                    sigma_of_a_celsius_temperature_has_no_offset);
    g_test_add_func("/quantity/parse/refusals-say-what-would-do", refusals_say_what_would_do);
    g_test_add_func("/quantity/format/text-for-people", text_for_people);
    g_test_add_func("/quantity/format/reads-back", text_reads_back);
    return g_test_run();
}
