#include "physics/agreement.h"

#include <glib.h>
#include <math.h>

#include "physics/physics_error.h"

/* NIST statistics reference page "ISO 13528 EN SCORE": printed scores 0.393, -0.262, -0.131, 0; their combined expanded
 * uncertainty, not printed, follows as 0.006/0.393. The rest is arithmetic on the definition; the last compares Hopper
 * and Laby 1941, 4.8020(13)e-10 esu, with the exact 4.8032e-10. */
static void en_published(void)
{
    static const struct {
        double x, reference, expanded_x, expanded_reference, en;
    } rows[] = {
        {1.006, 1.0, 0.01527, 0, 0.393},  {0.996, 1.0, 0.01527, 0, -0.262},
        {0.998, 1.0, 0.01527, 0, -0.131}, {1.000, 1.0, 0.01527, 0, 0.0},
        {10.05, 10.0, 0.04, 0.03, 1.0},   {10.03, 10.0, 0.04, 0.03, 0.6},
        {9.9, 10.0, 0.04, 0.03, -2.0},    {4.802, 4.8032, 0.0026, 0, -0.4615},
    };
    for (size_t i = 0; i < G_N_ELEMENTS(rows); i++) {
        const RfValue x = {rows[i].x, rows[i].expanded_x / 2.0};
        const RfValue reference = {rows[i].reference, rows[i].expanded_reference / 2.0};
        g_assert_cmpfloat_with_epsilon(rf_agreement_en_number(x, reference), rows[i].en, 0.0005);
    }
}

static void en_of_exact_numbers(void)
{
    g_assert_cmpfloat(rf_agreement_en_number((RfValue){2, 0}, (RfValue){2, 0}), ==, 0.0);
    g_assert_cmpfloat(rf_agreement_en_number((RfValue){3, 0}, (RfValue){2, 0}), ==, G_MAXDOUBLE);
    g_assert_cmpfloat(rf_agreement_en_number((RfValue){1, 0}, (RfValue){2, 0}), ==, -G_MAXDOUBLE);
}

/* J. M. Bland and D. G. Altman, Lancet 327 (1986) 307, table 1 (first readings by the large and the mini meter, L/min),
 * read in a statistics package's listing. Printed results from memory: bias -2.1, s 38.8, limits -79.7 and 75.5, intervals
 * -22.0..17.8, -114.3..-45.1, 40.9..110.0: the paper rounds s and t before it multiplies; to the digits of exact
 * arithmetic: -2.1176, 38.7651, -79.648, 75.413. */
static void bland_altman_1986(void)
{
    static const double large[] = {494, 395, 516, 434, 476, 557, 413, 442, 650,
                                   433, 417, 656, 267, 478, 178, 423, 427};
    static const double mini[] = {512, 430, 520, 428, 500, 600, 364, 380, 658,
                                  445, 432, 626, 260, 477, 259, 350, 451};
    double differences[17];
    for (int i = 0; i < 17; i++) differences[i] = large[i] - mini[i];
    RfAgreement agreement;
    g_autoptr(GError) error = NULL;
    g_assert_true(rf_agreement_limits(differences, 17, 2.0, 0.95, &agreement, &error));
    g_assert_cmpfloat_with_epsilon(agreement.bias, -2.1176, 0.00005);
    g_assert_cmpfloat_with_epsilon(agreement.standard_deviation, 38.7651, 0.00005);
    g_assert_cmpfloat_with_epsilon(agreement.lower, -79.6479, 0.0001);
    g_assert_cmpfloat_with_epsilon(agreement.upper, 75.4126, 0.0001);
    g_assert_cmpfloat_with_epsilon(agreement.u_bias, 9.4019, 0.00006);
    g_assert_cmpfloat_with_epsilon(agreement.u_limit, 16.2846, 0.00006);
    g_assert_cmpfloat_with_epsilon(agreement.bias_interval.low, -22.0488, 0.0001);
    g_assert_cmpfloat_with_epsilon(agreement.bias_interval.high, 17.8135, 0.0001);
    g_assert_cmpfloat_with_epsilon(agreement.lower_interval.low, -114.170, 0.001);
    g_assert_cmpfloat_with_epsilon(agreement.lower_interval.high, -45.126, 0.001);
    g_assert_cmpfloat_with_epsilon(agreement.upper_interval.low, 40.891, 0.001);
    g_assert_cmpfloat_with_epsilon(agreement.upper_interval.high, 109.934, 0.001);
    g_assert_true(rf_agreement_limits(differences, 17, 1.96, 0.95, &agreement, &error));
    g_assert_cmpfloat_with_epsilon(agreement.lower, -78.0973, 0.0001);
    g_assert_cmpfloat_with_epsilon(agreement.upper, 73.8620, 0.0001);
}

static void one_pair_is_too_few(void)
{
    const double one = 0.3;
    RfAgreement agreement;
    g_autoptr(GError) error = NULL;
    g_assert_false(rf_agreement_limits(&one, 1, 1.96, 0.95, &agreement, &error));
    g_assert_error(error, RF_PHYSICS_ERROR, RF_PHYSICS_ERROR_TOO_FEW);
}

int main(int argc, char **argv)
{
    g_test_init(&argc, &argv, NULL);
    g_test_add_func("/agreement/en-number/exact-numbers", en_of_exact_numbers);
    g_test_add_func("/agreement/en-number/published", en_published);
    g_test_add_func("/agreement/limits/bland-altman-1986", bland_altman_1986);
    g_test_add_func("/agreement/limits/one-pair-is-too-few", one_pair_is_too_few);
    return g_test_run();
}
