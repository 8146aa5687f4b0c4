#include "cli/text_number.h"

#include <locale.h>
#include <math.h>

static void check_fixed(double value, int decimals, const char *expected)
{
    g_autoptr(GString) out = g_string_new("<");
    rf_text_number_append_fixed(out, value, decimals);
    g_string_append_c(out, '>');
    g_autofree char *framed = g_strdup_printf("<%s>", expected);
    g_assert_cmpstr(out->str, ==, framed);
}

static void fixed_limits(void)
{
    check_fixed(0, 0, "0");
    check_fixed(0, 3, "0.000");
    check_fixed(-0.0, 2, "0.00");
    check_fixed(-0.004, 2, "0.00");
    check_fixed(-0.006, 2, "-0.01");
    check_fixed(12.5, 0, "13");
    check_fixed(999.99996, 4, "1000.0000");
    check_fixed(1e17, 2, "100000000000000000.00");
    check_fixed((double)NAN, 2, "");
    check_fixed((double)-INFINITY, 2, "");
}

/* Away from exact halves the C library's own formatting must agree, digit for digit. */
static void fixed_agrees_with_printf(void)
{
    for (int i = 1; i < 20000; i++) {
        const double value = (i % 2 ? 1 : -1) * i * 0.732187654321 / (1 + i % 977);
        char expected[64];
        g_ascii_formatd(expected, sizeof expected, "%.6f", value);
        check_fixed(value, 6, expected);
    }
}

static void exponent_form(void)
{
    g_autoptr(GString) out = g_string_new(NULL);
    rf_text_number_append_exponent(out, -1.602176634e-19, 6);
    g_assert_cmpstr(out->str, ==, "-1.602177e-19");
    g_string_truncate(out, 0);
    rf_text_number_append_exponent(out, -0.0, 2);
    g_assert_cmpstr(out->str, ==, "0.00e+00");
}

static void check_concise(double value, double sigma, const char *expected)
{
    g_autofree char *text = rf_text_number_concise((RfValue){value, sigma});
    g_assert_cmpstr(text, ==, expected);
}

/* JCGM 100:2008, 7.2.2: m_S = 100.02147(35) g, with u = 0.35 mg. */
static void concise_published(void)
{
    check_concise(100.02147, 0.00035, "100.02147(35)");
}

static void concise_cases(void)
{
    check_concise(6, 0.01, "6.000(10)");
    check_concise(0, 0.0213, "0.000(21)");
    check_concise(-1.23456, 0.0996, "-1.23(10)");
    check_concise(12345, 1234, "12300(1200)");
    check_concise(12.3, 15, "12(15)");
    check_concise(0.00123, 1.9, "0.0(19)");
    check_concise(-0.00123, 1.9, "0.0(19)");
    check_concise(5.25, 0, "5.25");
    g_autofree char *scaled = rf_text_number_concise_scaled((RfValue){1.6022e-19, 3.1e-22}, -19);
    g_assert_cmpstr(scaled, ==, "1.6022(31)");
}

/* What is settled is what a reader of the text gets, to the last bit. */
static void settle_is_what_is_read_back(void)
{
    const double values[] = {0, -0.0, 0.33333333333333331, -17.04565, 123456.7890625, 4.4e-9, -4.4e-9, 1e17, 639.99995};
    for (size_t i = 0; i < G_N_ELEMENTS(values); i++)
        for (int decimals = 0; decimals <= 9; decimals++) {
            g_autoptr(GString) text = g_string_new("");
            rf_text_number_append_fixed(text, values[i], decimals);
            const double read = g_ascii_strtod(text->str, NULL), settled = rf_text_number_settle(values[i], decimals);
            g_assert_true(settled == read && signbit(settled) == signbit(read));
            g_assert_true(rf_text_number_settle(settled, decimals) == settled);
        }
}

static void locale_does_not_matter(void)
{
    if (!setlocale(LC_NUMERIC, "de_DE.UTF-8"))
        g_test_message("no German locale here; checked under the default one");
    check_fixed(1.5, 2, "1.50");
    check_concise(100.02147, 0.00035, "100.02147(35)");
    setlocale(LC_NUMERIC, "C");
}

int main(int argc, char **argv)
{
    g_test_init(&argc, &argv, NULL);
    g_test_add_func("/text_number/fixed/limits", fixed_limits);
    g_test_add_func("/text_number/fixed/agrees-with-printf", fixed_agrees_with_printf);
    g_test_add_func("/text_number/settle/is-what-is-read-back", settle_is_what_is_read_back);
    g_test_add_func("/text_number/exponent/form", exponent_form);
    g_test_add_func("/text_number/concise/published", concise_published);
    g_test_add_func("/text_number/concise/cases", concise_cases);
    g_test_add_func("/text_number/locale/does-not-matter", locale_does_not_matter);
    return g_test_run();
}
